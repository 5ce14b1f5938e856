import type { ResampleKernel } from '../../shared/schemas/recipe'

/** Taps of a resampling kernel along one axis: sample positions start at floor(position) + first. */
export interface Taps { first: number, weights: Float32Array }

/**
 * Weights for reading at a position whose fractional part is `t` (0 ≤ t < 1), rounded to float32 so that
 * every arithmetic path uses the same numbers. They sum to 1 within float32.
 *
 * - cubic: Keys 1981, IEEE Trans. ASSP 29, 1153, with a = -1/2 (third order, reproduces quadratics).
 *   Costs 8 multiplications a sample (4 along each axis); keeps white noise at 0.69 of its variance per
 *   axis at t = 1/2 and overshoots a step by at most 1/16.
 * - bilinear: 4 multiplications; halves the variance per axis at t = 1/2 and blurs accordingly.
 * - nearest: none; shifts are rounded to whole pixels (a half goes to the larger coordinate).
 */
export function tapsAt(kernel: ResampleKernel, t: number): Taps {
  if (kernel === 'nearest') return { first: t < 0.5 ? 0 : 1, weights: Float32Array.of(1) }
  if (t === 0) return { first: 0, weights: Float32Array.of(1) }
  if (kernel === 'bilinear') return { first: 0, weights: Float32Array.of(1 - t, t) }
  const u = 1 - t
  return {
    first: -1,
    weights: Float32Array.of(
      -0.5 * t * u * u,
      1 + t * t * (1.5 * t - 2.5),
      1 + u * u * (1.5 * u - 2.5),
      -0.5 * u * t * t,
    ),
  }
}

/** One axis of a shift: source index = output index + offset + tap, and the outputs that lie within the source. */
export interface AxisShift { offset: number, weights: Float32Array, from: number, to: number }

/**
 * How a shift of `shift` px along an axis of `length` samples is read. Outputs [from, to) are those whose
 * position in the source lies in [0, length - 1]; taps beyond the ends repeat the last sample.
 */
export function axisShift(kernel: ResampleKernel, shift: number, length: number): AxisShift {
  const whole = Math.floor(-shift)
  const taps = tapsAt(kernel, -shift - whole)
  const moved = movedBy(kernel, shift)
  return { offset: whole + taps.first, weights: taps.weights, from: coveredFrom(moved), to: coveredTo(moved, length) }
}

/** The shift that a kernel really makes: whole pixels for "nearest", a half to the larger source coordinate. */
export function movedBy(kernel: ResampleKernel, shift: number): number {
  if (kernel !== 'nearest') return shift
  const whole = Math.floor(-shift)
  return -(whole + (-shift - whole < 0.5 ? 0 : 1))
}

/** First output that a moved axis covers, and the one after the last. */
export const coveredFrom = (moved: number): number => Math.max(0, Math.ceil(moved))
export const coveredTo = (moved: number, length: number): number => Math.min(length, Math.floor(length - 1 + moved) + 1)
