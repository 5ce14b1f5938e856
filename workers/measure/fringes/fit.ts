/**
 * Fringes: the power spectrum of a pair is that of its star image times 1 + β² + 2 β cos(2π u·d), with the flux ratio β and the
 * vector d between the stars (Labeyrie 1970, A&A 6, 85; from memory). The star image's own power is free on every ring, with
 * an elongation, or comes from a capture of a single star.
 */
import { cholesky, solveCholesky } from '../pair/solve'
import { eachFrequency, meanPower, noisePower, radialPower, type MeanSpectra, type SpectrumBlock } from './spectrum'

export interface Fringe { /** Vector between the stars, px, up to its sign. */ dx: number, dy: number, /** Fainter over brighter, 0-1. */ beta: number }
export interface FringeFit extends Fringe {
  /** Unexplained scatter of the power, relative to its own, with the fringes and without. */
  misfit: number
  misfitWithout: number
}

/** Frequencies that take part: power over that of its ring, or over the reference star's. */
interface Points { ux: Float64Array, uy: Float64Array, ratio: Float64Array, ring: Int32Array, weight: Float64Array, rings: number, elongates: boolean }

/** Below this share of the last frequency with signal the long-exposure image dominates and its power falls too steeply. */
const FIRST = 0.12
const LAST = 0.92

/**
 * The power of the star image alone on rings of whole radii: least squares of the power on the fringes known so far. The
 * ring means themselves would carry the fringes, and what they rise and fall by within a ring would pull the distance.
 */
function ringCurve({ n, cut }: MeanSpectra, power: Float64Array, noise: number, like: Fringe | null): (radius: number) => number {
  // First ring means; then what is left when the fall along the radius is taken out, because the frequencies of a ring do not
  // lie evenly about its radius.
  let curve: Float64Array<ArrayBufferLike> = new Float64Array(cut + 2).fill(1)
  const at = (radius: number) => {
    const low = Math.min(cut, Math.floor(radius))
    const a = Math.log(Math.max(1e-30, curve[low]!))
    return Math.exp(a + (Math.log(Math.max(1e-30, curve[low + 1]!)) - a) * (radius - low))
  }
  for (let round = 0; round < 4; round++) {
    const up = new Float64Array(cut + 2)
    const down = new Float64Array(cut + 2)
    eachFrequency(cut, cut, (index, kx, ky) => {
      const value = like ? 1 + like.beta ** 2 + 2 * like.beta * Math.cos(2 * Math.PI * (kx * like.dx + ky * like.dy) / n) : 1
      const radius = Math.hypot(kx, ky)
      const ring = Math.round(radius)
      up[ring]! += value * (power[index]! - noise) / at(radius)
      down[ring]! += value * value
    })
    curve = curve.map((old, ring) => old * (up[ring]! > 0 ? up[ring]! / down[ring]! : 1))
  }
  return at
}

function pointsOf(spectra: MeanSpectra, blocks: readonly SpectrumBlock[], last: number, reference: MeanSpectra | null, like: Fringe | null = null): Points {
  const { n, cut } = spectra
  const power = meanPower(blocks)
  const noise = noisePower(spectra, power)
  const base = reference && meanPower(reference.blocks)
  const baseNoise = reference && base ? noisePower(reference, base) : 0
  const curve = ringCurve(spectra, power, noise, like)
  const ux: number[] = []
  const uy: number[] = []
  const ratio: number[] = []
  const ring: number[] = []
  const weight: number[] = []
  eachFrequency(cut, LAST * last, (index, kx, ky) => {
    const radius = Math.hypot(kx, ky)
    if (radius < Math.max(2, FIRST * last)) return
    const own = base ? base[index]! - baseNoise : curve(radius)
    if (!(own > 0)) return
    ux.push(kx / n)
    uy.push(ky / n)
    ratio.push((power[index]! - noise) / own)
    ring.push(base ? 0 : Math.round(radius))
    // Speckle noise is a share of the power, photon noise is not.
    weight.push(1 / (1 + noise / own) ** 2)
  })
  return { ux: Float64Array.from(ux), uy: Float64Array.from(uy), ratio: Float64Array.from(ratio), ring: Int32Array.from(ring), weight: Float64Array.from(weight), rings: Math.max(0, ...ring) + 1, elongates: !base }
}

/** The model at all points for [dx, dy, b, e1, e2]; the level of each ring follows from the data by linear least squares. */
function modelOf({ ux, uy, ratio, ring, weight, rings, elongates }: Points, [dx, dy, beta, e1, e2]: readonly number[]): Float64Array {
  const out = new Float64Array(ux.length)
  const up = new Float64Array(rings)
  const down = new Float64Array(rings)
  const most = LAST ** 2 * Math.max(1e-12, ux.at(-1)! ** 2 + uy.at(-1)! ** 2)
  for (let i = 0; i < out.length; i++) {
    const x = ux[i]!
    const y = uy[i]!
    const stretch = elongates ? Math.exp((e1! * (x * x - y * y) + e2! * 2 * x * y) / most) : 1
    const value = (1 + beta! * beta! + 2 * beta! * Math.cos(2 * Math.PI * (x * dx! + y * dy!))) * stretch
    out[i] = value
    up[ring[i]!]! += weight[i]! * value * ratio[i]!
    down[ring[i]!]! += weight[i]! * value * value
  }
  for (let i = 0; i < out.length; i++) out[i]! *= up[ring[i]!]! / Math.max(1e-30, down[ring[i]!]!)
  return out
}

function misfitOf(points: Points, parameters: readonly number[]): number {
  const model = modelOf(points, parameters)
  let sum = 0
  let weights = 0
  for (let i = 0; i < model.length; i++) {
    sum += points.weight[i]! * (points.ratio[i]! - model[i]!) ** 2
    weights += points.weight[i]!
  }
  return Math.sqrt(sum / Math.max(1e-30, weights))
}

const STEPS = [1e-4, 1e-4, 1e-4, 1e-4, 1e-4]

/**
 * Damped least squares (Levenberg 1944, Marquardt 1963), damped by the diagonal: distances, flux ratio and elongation have very
 * different scales, and the damping must not depend on them.
 */
function solve(points: Points, start: Fringe): { fringe: Fringe, misfit: number, parameters: number[] } {
  let parameters = [start.dx, start.dy, start.beta, 0, 0]
  const count = parameters.length
  let model = modelOf(points, parameters)
  let misfit = misfitOf(points, parameters)
  let damping = 1e-3
  for (let round = 0; round < 60 && damping < 1e8; round++) {
    const slopes = STEPS.map((step, a) => modelOf(points, parameters.map((value, b) => (a === b ? value + step : value))))
    const matrix = new Float64Array(count * count)
    const right = new Float64Array(count)
    for (let i = 0; i < model.length; i++) {
      const w = points.weight[i]!
      for (let a = 0; a < count; a++) {
        const slope = w * (slopes[a]![i]! - model[i]!) / STEPS[a]!
        right[a]! += slope * (points.ratio[i]! - model[i]!)
        for (let b = 0; b < count; b++) matrix[a * count + b]! += slope * (slopes[b]![i]! - model[i]!) / STEPS[b]!
      }
    }
    for (let a = 0; a < count; a++) matrix[a * count + a] = matrix[a * count + a]! * (1 + damping) + 1e-12
    const factor = cholesky(matrix, count)
    if (!factor) {
      damping *= 10
      continue
    }
    const step = solveCholesky(factor, count, right)
    const long = Math.max(1, Math.hypot(step[0]!, step[1]!))
    // A flux ratio over 1 would be the same pair the other way round.
    const next = parameters.map((value, a) => value + (a < 2 ? step[a]! / long : step[a]!)).map((value, a) => (a === 2 ? Math.min(1, Math.max(0, value)) : a > 2 ? Math.min(3, Math.max(-3, value)) : value))
    const after = misfitOf(points, next)
    if (!(after < misfit)) {
      damping *= 8
      continue
    }
    const gain = (misfit - after) / misfit
    parameters = next
    misfit = after
    model = modelOf(points, parameters)
    damping = Math.max(damping / 8, 1e-9)
    if (gain < 1e-8) break
  }
  const [dx, dy, beta] = parameters as [number, number, number]
  return { fringe: { dx, dy, beta }, misfit, parameters }
}

/** Where the autocorrelation of the flattened spectrum has its side peaks: the likeliest vectors to begin with. */
function candidates(points: Points, least: number, most: number): Fringe[] {
  const reach = Math.ceil(most)
  const side = 2 * reach + 1
  const map = new Float64Array((reach + 1) * side)
  const weights = points.weight
  // Separable sums would be faster; a few thousand points over a small map take little.
  const step = Math.max(1, Math.floor(points.ux.length * map.length / 3e7))
  for (let dy = 0; dy <= reach; dy++) {
    for (let dx = -reach; dx <= reach; dx++) {
      let sum = 0
      for (let i = 0; i < points.ux.length; i += step) sum += weights[i]! * (points.ratio[i]! - 1) * Math.cos(2 * Math.PI * (points.ux[i]! * dx + points.uy[i]! * dy))
      map[dy * side + dx + reach] = sum
    }
  }
  const peaks: { dx: number, dy: number, height: number }[] = []
  for (let dy = 0; dy <= reach; dy++) {
    for (let dx = -reach; dx <= reach; dx++) {
      const distance = Math.hypot(dx, dy)
      if (distance < least || distance > most || (dy === 0 && dx < 0)) continue
      const height = map[dy * side + dx + reach]!
      let top = true
      for (let y = Math.max(0, dy - 1); y <= Math.min(reach, dy + 1) && top; y++) for (let x = Math.max(-reach, dx - 1); x <= Math.min(reach, dx + 1); x++) if (map[y * side + x + reach]! > height) top = false
      if (top) peaks.push({ dx, dy, height })
    }
  }
  peaks.sort((a, b) => b.height - a.height)
  const close = [0, 1, 2, 3, 4, 5].map(k => ({ dx: 1.1 * least * Math.cos(k * Math.PI / 6), dy: 1.1 * least * Math.sin(k * Math.PI / 6), beta: 0.6 }))
  return [...peaks.slice(0, 4).map(({ dx, dy }) => ({ dx, dy, beta: 0.4 })), ...close]
}

export interface FringeOptions { /** A single star's spectra, made with the same window. */ reference?: MeanSpectra | null, /** Where to begin; found blind otherwise. */ start?: Fringe }

/**
 * Fits the fringes of a pair; null where the spectrum holds too few frequencies. The sign of the vector is free here, see
 * `directionOf`. `answers` are those without each block of time, for jackknife errors; empty with too few blocks.
 */
export function fitFringes(spectra: MeanSpectra, { reference = null, start }: FringeOptions = {}): { fit: FringeFit, answers: Fringe[] } | null {
  const last = radialPower(spectra).drownsAt * spectra.n
  const points = pointsOf(spectra, spectra.blocks, last, reference)
  if (points.ux.length < 60) return null
  // 0.7 of λ/D and more: the last frequency with signal is at most D/λ.
  const least = 0.7 * spectra.n / last
  const starts = start ? [start] : candidates(points, least, spectra.n / 3)
  let best: ReturnType<typeof solve> | null = null
  for (const one of starts) {
    const solved = solve(points, one)
    const distance = Math.hypot(solved.fringe.dx, solved.fringe.dy)
    if (distance < 0.8 * least || distance > spectra.n / 2) continue
    if (!best || solved.misfit < best.misfit) best = solved
  }
  if (!best) return null
  for (let round = 0; round < 2; round++) best = solve(pointsOf(spectra, spectra.blocks, last, reference, best.fringe), best.fringe)
  const { fringe, parameters } = best
  const { blocks } = spectra
  // Jackknife over blocks of time (Tukey 1958): all but one, each in turn.
  const answers = blocks.length < 5 ? [] : blocks.map((_, k) => solve(pointsOf(spectra, blocks.filter((_, i) => i !== k), last, reference, fringe), fringe).fringe)
  return { fit: { ...fringe, misfit: best.misfit, misfitWithout: misfitOf(points, [0, 0, 0, parameters[3]!, parameters[4]!]) }, answers }
}

/** Visibility of the fringes of a flux ratio, and back (V = 2β/(1 + β²)). */
export const visibilityOf = (beta: number): number => 2 * beta / (1 + beta * beta)
export const ratioOf = (visibility: number): number => visibility === 0 ? 0 : (1 - Math.sqrt(Math.max(0, 1 - visibility * visibility))) / visibility
