import { chiSquaredOf, normalEquations, PairModel, pixelsAround, solveCholesky, stepped, valuesOf, type ModelState, type Pixels, type Prior } from './model'
import type { NoiseModel } from './noise'
import { createProfile, type Profile } from './profile'
import { MeasureError, type Component, type MeasureImage, type PairFit } from './types'

const MOST_STEPS = 40

export interface FitOptions {
  /** Width of the star image to begin with, px. */
  fwhmPx: number
  /** Sky level, image units. */
  background: number
  noise: NoiseModel
  /** Highest harmonic of the shared image's angle, 0-4. */
  harmonics: number
  /** Radius about each star that takes part, px. */
  radius: number
  /** Width that the knots of the shared image are spaced by, over the width of the star image; 1 unless said. */
  spacing?: number
}

/** A solved fit with all that error propagation needs. */
export interface Solved {
  state: ModelState
  profile: Profile
  pixels: Pixels
  prior: Prior | null
  factor: Float64Array
  model: PairModel
  chiSquared: number
}

/**
 * Fits places, fluxes, sky and shared image together (Levenberg 1944, Marquardt 1963: damped least squares), first with a
 * round image, then with an angular form that is held small where the data do not ask for it.
 * Throws MeasureError where the fit does not settle.
 */
export function fitComponents(image: MeasureImage, start: readonly Component[], options: FitOptions): Solved {
  const reach = options.radius + Math.max(...start.flatMap(a => start.map(b => Math.hypot(a.x - b.x, a.y - b.y))))
  const pixels = pixelsAround(image, start, options.radius, options.background, options.noise)
  const width = options.fwhmPx * (options.spacing ?? 1)
  const round = createProfile(width, reach, 0)
  const first = solve(image, round, pixels, initial(start, round, options), null)
  if (options.harmonics === 0) return first
  const full = createProfile(width, reach, options.harmonics)
  const shape = new Float64Array(full.count)
  shape.set(first.state.shape)
  const at0 = (radius: number) => shapeAt(round, first.state.shape, radius)
  // An eighth of the round image at that radius, less for the finer harmonics.
  const sigma = Float64Array.from(full.terms, ({ harmonic, radius }) => harmonic === 0 ? Infinity : Math.max(Math.abs(at0(radius)), 1e-4 * Math.abs(at0(0))) / (8 * Math.max(1, harmonic - 1)))
  return solve(image, full, pixels, { ...first.state, shape }, { sigma })
}

/** Places and fluxes as given; the form of the image comes from the first, linear step. */
function initial(start: readonly Component[], round: Profile, { background }: FitOptions): ModelState {
  return { components: start.map((star, j) => ({ ...star, flux: j === 0 ? 1 : star.flux })), sky: [background, 0, 0], shape: new Float64Array(round.count) }
}

function solve(image: MeasureImage, profile: Profile, pixels: Pixels, from: ModelState, prior: Prior | null): Solved {
  const model = new PairModel(profile, pixels, from.components.length)
  const values = pixels.value
  let state = linearStep(model, from, values, prior)
  let current = chiSquaredOf(model, state, values, prior)
  let damping = 1e-3
  for (let round = 0; round < MOST_STEPS; round++) {
    const { factor, right } = normalEquations(model, state, values, prior, damping)
    if (!factor) {
      damping = Math.max(damping, 1e-6) * 10
      continue
    }
    const step = bounded(solveCholesky(factor, model.parameters, right), state)
    const next = stepped(state, step)
    const chiSquared = chiSquaredOf(model, next, values, prior)
    if (!(chiSquared < current)) {
      damping *= 8
      if (damping > 1e8) break
      continue
    }
    const gain = (current - chiSquared) / Math.max(current, 1e-300)
    const moved = Math.max(...Array.from({ length: 2 * state.components.length }, (_, k) => Math.abs(step[k]!)))
    state = next
    current = chiSquared
    damping = Math.max(damping / 10, 1e-12)
    if (gain < 1e-7 && moved < 1e-5) break
  }
  const { factor, chiSquared } = normalEquations(model, state, values, prior, 0)
  if (!factor || state.components.some(star => !Number.isFinite(star.x + star.y + star.flux))) throw new MeasureError('The fit of the star images did not settle.')
  return { state, profile, pixels, prior, factor, model, chiSquared: chiSquared / Math.max(1, values.length - model.parameters) }
}

/** Sky and shape for fixed places and fluxes: a linear problem, solved at once. */
function linearStep(model: PairModel, state: ModelState, values: Float64Array, prior: Prior | null): ModelState {
  const fixed = 3 * model.stars - 1
  const { factor, right } = normalEquations(model, state, values, prior, 1e-9, fixed)
  if (!factor) throw new MeasureError('The star images cannot be fitted here: too few pixels see them.')
  return stepped(state, solveCholesky(factor, model.parameters, right))
}

/** A star moves by at most half a pixel a step. */
function bounded(step: Float64Array, state: ModelState): Float64Array {
  const places = 2 * state.components.length
  let most = 0
  for (let k = 0; k < places; k++) most = Math.max(most, Math.abs(step[k]!))
  if (most > 0.5) for (let k = 0; k < places; k++) step[k]! *= 0.5 / most
  return step
}

/** The shared image at a radius, without its angular part. */
export function shapeAt(profile: Profile, shape: Float64Array, radius: number): number {
  const value = new Float64Array(profile.count)
  const unused = new Float64Array(profile.count)
  profile.at(radius, 0, value, unused, unused.slice())
  return value.reduce((sum, one, k) => sum + (profile.terms[k]!.harmonic === 0 ? one * shape[k]! : 0), 0)
}

/** Full width at half maximum of the shared image, px. */
export function widthOf({ profile, state }: Solved): number {
  const top = shapeAt(profile, state.shape, 0)
  let radius = 0
  while (radius < 200 && shapeAt(profile, state.shape, radius) > top / 2) radius += 0.02
  return 2 * radius
}

export function summaryOf(solved: Solved): PairFit {
  return { components: solved.state.components, fwhmPx: widthOf(solved), chiSquared: solved.chiSquared, peak: shapeAt(solved.profile, solved.state.shape, 0) }
}

/**
 * How places and fluxes answer to a small change of the image: the change of all parameters for the same pixels of another
 * image, to first order. Applied to block stacks it gives their measures without fitting each anew.
 */
export function responseOf(solved: Solved): (image: MeasureImage) => Component[] {
  const { model, state, pixels, factor } = solved
  const n = model.parameters
  const stars = state.components.length
  const wanted = 3 * stars - 1
  // Rows of H⁻¹ Jᵀ W for the wanted parameters.
  const inverse = Array.from({ length: wanted }, (_, a) => solveCholesky(factor, n, Float64Array.from({ length: n }, (_, b) => (a === b ? 1 : 0))))
  const gains = inverse.map(() => new Float64Array(pixels.value.length))
  const base = new Float64Array(pixels.value.length)
  const row = new Float64Array(n)
  for (let i = 0; i < pixels.value.length; i++) {
    base[i] = pixels.value[i]!
    model.row(state, i, row)
    for (let a = 0; a < wanted; a++) {
      let sum = 0
      const line = inverse[a]!
      for (let b = 0; b < n; b++) sum += line[b]! * row[b]!
      gains[a]![i] = sum * pixels.weight[i]!
    }
  }
  return (image) => {
    const values = valuesOf(image, pixels)
    const change = gains.map((gain) => {
      let sum = 0
      for (let i = 0; i < values.length; i++) sum += gain[i]! * (values[i]! - base[i]!)
      return sum
    })
    return state.components.map((star, j) => ({ x: star.x + change[2 * j]!, y: star.y + change[2 * j + 1]!, flux: j === 0 ? 1 : star.flux + change[2 * stars + j - 1]! }))
  }
}
