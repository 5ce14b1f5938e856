import { cholesky, solveCholesky } from './solve'
import type { NoiseModel } from './noise'
import type { Profile } from './profile'
import type { Component, MeasureImage } from './types'

/**
 * The model of a stack with several stars: sky + Σ flux × shared image about each star. Parameters in this order: for each
 * star x, y; for each star but the first its flux (the first has 1); three of the sky (a plane); those of the shared image.
 */
export interface ModelState { components: Component[], sky: [number, number, number], shape: Float64Array }

/** Pixels that take part, and their weights. */
export interface Pixels { x: Float64Array, y: Float64Array, value: Float64Array, weight: Float64Array }

export const parameterCount = (stars: number, shape: number): number => 3 * stars - 1 + 3 + shape

/** Pixels within `radius` of a component. */
export function pixelsAround(image: MeasureImage, components: readonly Component[], radius: number, background: number, noise: NoiseModel): Pixels {
  const xs: number[] = []
  const ys: number[] = []
  const values: number[] = []
  for (let y = 0; y < image.height; y++) {
    for (let x = 0; x < image.width; x++) {
      if (!components.some(star => (x - star.x) ** 2 + (y - star.y) ** 2 <= radius * radius)) continue
      xs.push(x)
      ys.push(y)
      values.push(image.samples[y * image.width + x]!)
    }
  }
  return { x: Float64Array.from(xs), y: Float64Array.from(ys), value: Float64Array.from(values), weight: Float64Array.from(values, value => 1 / noise(value - background)) }
}

/** Values of the same pixels in another image of the same size. */
export function valuesOf(image: MeasureImage, pixels: Pixels): Float64Array {
  return Float64Array.from(pixels.x, (x, i) => image.samples[pixels.y[i]! * image.width + x]!)
}

export class PairModel {
  readonly #v: Float64Array
  readonly #dx: Float64Array
  readonly #dy: Float64Array
  constructor(readonly profile: Profile, readonly pixels: Pixels, readonly stars: number) {
    this.#v = new Float64Array(profile.count)
    this.#dx = new Float64Array(profile.count)
    this.#dy = new Float64Array(profile.count)
  }

  get parameters(): number { return parameterCount(this.stars, this.profile.count) }

  /** Fills one row of derivatives for pixel i and returns the model's value there. */
  row(state: ModelState, i: number, out: Float64Array): number {
    const { components, sky, shape } = state
    const stars = this.stars
    const px = this.pixels.x[i]!
    const py = this.pixels.y[i]!
    const first = 3 * stars - 1
    out.fill(0)
    // The sky's slope is taken about the first star.
    const sx = (px - components[0]!.x) / 32
    const sy = (py - components[0]!.y) / 32
    out[first] = 1
    out[first + 1] = sx
    out[first + 2] = sy
    let value = sky[0] + sky[1] * sx + sky[2] * sy
    for (let j = 0; j < stars; j++) {
      const star = components[j]!
      this.profile.at(px - star.x, py - star.y, this.#v, this.#dx, this.#dy)
      let image = 0
      let gx = 0
      let gy = 0
      for (let k = 0; k < shape.length; k++) {
        const c = shape[k]!
        image += c * this.#v[k]!
        gx += c * this.#dx[k]!
        gy += c * this.#dy[k]!
        out[first + 3 + k]! += star.flux * this.#v[k]!
      }
      out[2 * j] = -star.flux * gx
      out[2 * j + 1] = -star.flux * gy
      if (j > 0) out[2 * stars + j - 1] = image
      value += star.flux * image
    }
    return value
  }
}

/**
 * A prior: parameter k is expected at `mean` (0) with standard deviation `sigma`. It keeps the angular form of the shared image
 * from explaining a companion away where the pixels alone cannot tell the two apart.
 */
export interface Prior { sigma: Float64Array }

/** Weighted normal equations at a state: the damped factor, the right side and chi-squared. The first `fixed` parameters stay. */
export function normalEquations(model: PairModel, state: ModelState, values: Float64Array, prior: Prior | null, damping: number, fixed = 0): { factor: Float64Array | null, right: Float64Array, chiSquared: number } {
  const n = model.parameters
  const { weight } = model.pixels
  const matrix = new Float64Array(n * n)
  const right = new Float64Array(n)
  const row = new Float64Array(n)
  const used = new Int32Array(n)
  let chiSquared = 0
  for (let i = 0; i < values.length; i++) {
    const difference = values[i]! - model.row(state, i, row)
    const w = weight[i]!
    chiSquared += w * difference * difference
    let count = 0
    for (let a = 0; a < n; a++) if (row[a] !== 0) used[count++] = a
    for (let p = 0; p < count; p++) {
      const a = used[p]!
      const wa = w * row[a]!
      right[a]! += wa * difference
      for (let q = 0; q <= p; q++) matrix[a * n + used[q]!]! += wa * row[used[q]!]!
    }
  }
  const first = 3 * model.stars + 2
  if (prior) {
    for (let k = 0; k < state.shape.length; k++) {
      const strength = prior.sigma[k]! > 0 && Number.isFinite(prior.sigma[k]!) ? 1 / prior.sigma[k]! ** 2 : 0
      matrix[(first + k) * n + first + k]! += strength
      right[first + k]! -= strength * state.shape[k]!
      chiSquared += strength * state.shape[k]! ** 2
    }
  }
  for (let a = 0; a < fixed; a++) {
    right[a] = 0
    for (let b = 0; b < n; b++) matrix[Math.max(a, b) * n + Math.min(a, b)] = 0
  }
  for (let a = 0; a < n; a++) matrix[a * n + a]! = matrix[a * n + a]! * (1 + damping) + 1e-300
  for (let a = 0; a < n; a++) for (let b = a + 1; b < n; b++) matrix[a * n + b] = matrix[b * n + a]!
  // A function that no pixel sees has an empty row; it stays where it is.
  for (let a = 0; a < n; a++) if (matrix[a * n + a]! < 1e-200) matrix[a * n + a] = 1
  return { factor: cholesky(matrix, n), right, chiSquared }
}

/** The state after a step of all parameters. */
export function stepped(state: ModelState, step: Float64Array): ModelState {
  const stars = state.components.length
  const first = 3 * stars - 1
  return {
    components: state.components.map((star, j) => ({ x: star.x + step[2 * j]!, y: star.y + step[2 * j + 1]!, flux: j === 0 ? 1 : star.flux + step[2 * stars + j - 1]! })),
    sky: [state.sky[0] + step[first]!, state.sky[1] + step[first + 1]!, state.sky[2] + step[first + 2]!],
    shape: state.shape.map((value, k) => value + step[first + 3 + k]!),
  }
}

/** Chi-squared of a state, with the prior's share. */
export function chiSquaredOf(model: PairModel, state: ModelState, values: Float64Array, prior: Prior | null): number {
  const row = new Float64Array(model.parameters)
  let sum = 0
  for (let i = 0; i < values.length; i++) sum += model.pixels.weight[i]! * (values[i]! - model.row(state, i, row)) ** 2
  if (prior) for (let k = 0; k < state.shape.length; k++) if (prior.sigma[k]! > 0 && Number.isFinite(prior.sigma[k]!)) sum += (state.shape[k]! / prior.sigma[k]!) ** 2
  return sum
}

export { solveCholesky }
