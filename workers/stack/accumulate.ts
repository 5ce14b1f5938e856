import type { ResampleKernel } from '../../shared/schemas/recipe'
import { axisShift, coveredFrom, coveredTo, movedBy } from './weights'

/** Fixed-point values are clipped to this, so that 500 of them fit a 32-bit sum. */
export const FIXED_LIMIT = 4_194_303
/** Frames that may be added to a 32-bit sum before it has to be emptied into doubles. */
export const FIXED_FRAMES = 500

/** Adding and subtracting 1.5 × 2^23 rounds a float32 below 2^22 to an integer, halves to even. */
const ROUND = 12_582_912

/** Outputs [x0, x1) × [y0, y1) that a shifted frame covers. */
export interface Covered { x0: number, y0: number, x1: number, y1: number }

/** What a frame shifted by (dx, dy) covers of its own grid. May be empty (x1 ≤ x0 or y1 ≤ y0). */
export function coveredBy(kernel: ResampleKernel, width: number, height: number, dx: number, dy: number): Covered {
  const x = movedBy(kernel, dx)
  const y = movedBy(kernel, dy)
  return { x0: coveredFrom(x), y0: coveredFrom(y), x1: coveredTo(x, width), y1: coveredTo(y, height) }
}

/** Buffers that one accumulator needs; reused for every frame of the same width. */
export interface ShiftScratch { row: Float32Array }
export const scratchFor = (width: number): ShiftScratch => ({ row: new Float32Array(width + 8) })

/**
 * Adds one plane, shifted by (dx, dy) px, to fixed-point sums:
 * sum[Y, X] += sign × round(scale × source(X - dx, Y - dy)), where the plane covers (X, Y).
 *
 * All arithmetic is float32 in a stated order, so that a vector unit gives the same integers; sums of
 * integers do not depend on the order of the frames. Infinite values clip, not-a-number counts as 0.
 */
export function accumulateShifted(
  source: Float32Array, width: number, height: number, dx: number, dy: number,
  kernel: ResampleKernel, scale: number, sign: 1 | -1, sum: Int32Array, scratch: ShiftScratch,
): void {
  const ax = axisShift(kernel, dx, width)
  const ay = axisShift(kernel, dy, height)
  const row = scratch.row
  const last = height - 1
  const { from: x0, to: x1, offset: ox } = ax
  if (x1 <= x0) return
  for (let y = ay.from; y < ay.to; y++) {
    blendRows(source, width, last, y + ay.offset, ay.weights, row)
    const out = y * width
    if (ax.weights.length === 6) addSix(row, ax.weights, x0, x1, ox + PAD, scale, sign, sum, out)
    else if (ax.weights.length === 4) addCubic(row, ax.weights, x0, x1, ox + PAD, scale, sign, sum, out)
    else if (ax.weights.length === 2) addLinear(row, ax.weights, x0, x1, ox + PAD, scale, sign, sum, out)
    else addWhole(row, x0, x1, ox + PAD, scale, sign, sum, out)
  }
}

/** Samples of padding before a blended row; it repeats the first sample, and as many after it the last. */
const PAD = 3

/** Blends the source rows of one output row into `row`, padded at both ends. */
function blendRows(source: Float32Array, width: number, last: number, y: number, weights: Float32Array, row: Float32Array): void {
  const at = (k: number) => Math.min(last, Math.max(0, y + k)) * width
  const a = at(0)
  if (weights.length === 1) {
    for (let x = 0; x < width; x++) row[x + PAD] = source[a + x]!
  }
  else if (weights.length === 2) {
    const b = at(1)
    const w0 = weights[0]!, w1 = weights[1]!
    for (let x = 0; x < width; x++) {
      row[x + PAD] = Math.fround(Math.fround(w0 * source[a + x]!) + Math.fround(w1 * source[b + x]!))
    }
  }
  else if (weights.length === 6) {
    const b = at(1), c = at(2), d = at(3), e = at(4), f = at(5)
    const w0 = weights[0]!, w1 = weights[1]!, w2 = weights[2]!, w3 = weights[3]!, w4 = weights[4]!, w5 = weights[5]!
    for (let x = 0; x < width; x++) {
      row[x + PAD] = Math.fround(Math.fround(Math.fround(Math.fround(Math.fround(Math.fround(w0 * source[a + x]!) + Math.fround(w1 * source[b + x]!))
        + Math.fround(w2 * source[c + x]!)) + Math.fround(w3 * source[d + x]!)) + Math.fround(w4 * source[e + x]!)) + Math.fround(w5 * source[f + x]!))
    }
  }
  else {
    const b = at(1), c = at(2), d = at(3)
    const w0 = weights[0]!, w1 = weights[1]!, w2 = weights[2]!, w3 = weights[3]!
    for (let x = 0; x < width; x++) {
      row[x + PAD] = Math.fround(Math.fround(Math.fround(Math.fround(w0 * source[a + x]!) + Math.fround(w1 * source[b + x]!))
        + Math.fround(w2 * source[c + x]!)) + Math.fround(w3 * source[d + x]!))
    }
  }
  row[0] = row[1] = row[2] = row[PAD]!
  row[width + PAD] = row[width + PAD + 1] = row[width + PAD + 2] = row[width + PAD - 1]!
}

function addCubic(row: Float32Array, weights: Float32Array, x0: number, x1: number, offset: number, scale: number, sign: number, sum: Int32Array, out: number): void {
  const w0 = weights[0]!, w1 = weights[1]!, w2 = weights[2]!, w3 = weights[3]!
  const s = Math.fround(scale)
  for (let x = x0; x < x1; x++) {
    const i = x + offset
    const value = Math.fround(Math.fround(Math.fround(Math.fround(w0 * row[i]!) + Math.fround(w1 * row[i + 1]!))
      + Math.fround(w2 * row[i + 2]!)) + Math.fround(w3 * row[i + 3]!))
    sum[out + x]! += sign * fixed(Math.fround(value * s))
  }
}

function addSix(row: Float32Array, weights: Float32Array, x0: number, x1: number, offset: number, scale: number, sign: number, sum: Int32Array, out: number): void {
  const w0 = weights[0]!, w1 = weights[1]!, w2 = weights[2]!, w3 = weights[3]!, w4 = weights[4]!, w5 = weights[5]!
  const s = Math.fround(scale)
  for (let x = x0; x < x1; x++) {
    const i = x + offset
    const value = Math.fround(Math.fround(Math.fround(Math.fround(Math.fround(Math.fround(w0 * row[i]!) + Math.fround(w1 * row[i + 1]!))
      + Math.fround(w2 * row[i + 2]!)) + Math.fround(w3 * row[i + 3]!)) + Math.fround(w4 * row[i + 4]!)) + Math.fround(w5 * row[i + 5]!))
    sum[out + x]! += sign * fixed(Math.fround(value * s))
  }
}

function addLinear(row: Float32Array, weights: Float32Array, x0: number, x1: number, offset: number, scale: number, sign: number, sum: Int32Array, out: number): void {
  const w0 = weights[0]!, w1 = weights[1]!
  const s = Math.fround(scale)
  for (let x = x0; x < x1; x++) {
    const i = x + offset
    sum[out + x]! += sign * fixed(Math.fround(Math.fround(Math.fround(w0 * row[i]!) + Math.fround(w1 * row[i + 1]!)) * s))
  }
}

function addWhole(row: Float32Array, x0: number, x1: number, offset: number, scale: number, sign: number, sum: Int32Array, out: number): void {
  const s = Math.fround(scale)
  for (let x = x0; x < x1; x++) sum[out + x]! += sign * fixed(Math.fround(row[x + offset]! * s))
}

/** A float32 rounded to a clipped 32-bit integer, halves to even; not-a-number gives 0. */
function fixed(value: number): number {
  const clipped = value > FIXED_LIMIT ? FIXED_LIMIT : value < -FIXED_LIMIT ? -FIXED_LIMIT : value
  return Math.fround(Math.fround(clipped + ROUND) - ROUND) | 0
}
