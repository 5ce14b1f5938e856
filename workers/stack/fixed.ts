/**
 * Sums that do not depend on the order of addition: samples become integers (value × scale, rounded) and
 * integers are added. A 32-bit sum holds 500 frames; it is emptied into doubles, which hold integers
 * exactly up to 2^53, enough for 2^31 frames.
 */
import { FIXED_FRAMES, FIXED_LIMIT } from './accumulate'

/**
 * The power of two by which samples are multiplied. Twice the largest expected magnitude must fit below
 * the clipping limit, because a cubic kernel overshoots by up to 1.56 where samples jump.
 */
export function fixedScale(largest: number): number {
  if (!(largest > 0) || !Number.isFinite(largest)) return 1
  return 2 ** Math.floor(Math.log2(FIXED_LIMIT / (2 * largest)))
}

/** A growing exact sum of planes; `pending` counts the frames in the 32-bit part. */
export interface FixedSum { small: Int32Array, large: Float64Array | null, pending: number }

/** @param small the 32-bit part, all zeros */
export const fixedSum = (small: Int32Array): FixedSum => ({ small, large: null, pending: 0 })

/** Call before adding a frame: empties the 32-bit part when it is full. */
export function makeRoom(sum: FixedSum): void {
  if (sum.pending >= FIXED_FRAMES) {
    empty(sum)
  }
  sum.pending += 1
}

function empty(sum: FixedSum): void {
  sum.large ??= new Float64Array(sum.small.length)
  addInto(sum.large, sum.small)
  sum.small.fill(0)
  sum.pending = 0
}

/** Adds a fixed-point sum to exact doubles. */
export function addSum(into: Float64Array, sum: FixedSum): void {
  if (sum.large) addInto(into, sum.large)
  if (sum.pending > 0) addInto(into, sum.small)
}

export function addInto(into: Float64Array, from: Int32Array | Float64Array): void {
  for (let i = 0; i < into.length; i++) into[i]! += from[i]!
}
