/** Several drift calibrations together. */
import { angleDifference, reduce360 } from './angles'
import { weightedMean } from './combine'

/** What one drift says; errors are standard errors. */
export interface DriftValues { scaleArcsecPerPx: number, scaleErr: number, westDirectionDeg: number, angleErr: number }

export interface CombinedDrifts {
  scaleArcsecPerPx: number
  scaleErr: number
  westDirectionDeg: number
  angleErr: number
  /** Chi-squared of scales and of angles about their weighted means, and the degrees of freedom of each. */
  scatter: { scale: number, angle: number, freedom: number }
}

/**
 * The weighted mean of several drifts of one set-up. Where they scatter by more than their errors say, the errors grow by
 * the square root of chi-squared over its degrees of freedom (the usual scale factor, e.g. Particle Data Group, Review of
 * Particle Physics, introduction; from memory).
 */
export function combineDrifts(drifts: readonly DriftValues[]): CombinedDrifts {
  const first = drifts[0]
  if (!first) throw new RangeError('There is no drift to combine.')
  const scale = weightedMean(drifts.map(({ scaleArcsecPerPx, scaleErr }) => ({ value: scaleArcsecPerPx, err: scaleErr })))
  const angle = weightedMean(drifts.map(({ westDirectionDeg, angleErr }) => ({ value: angleDifference(westDirectionDeg, first.westDirectionDeg), err: angleErr })))
  return {
    scaleArcsecPerPx: scale.value, scaleErr: scale.err,
    westDirectionDeg: reduce360(first.westDirectionDeg + angle.value), angleErr: angle.err,
    scatter: { scale: scale.chiSquared, angle: angle.chiSquared, freedom: drifts.length - 1 },
  }
}

/** How many more drifts like these reach a wanted error: 0 where it is reached. The error of a mean falls as 1/√n. */
export function driftsMissing(count: number, error: number, wanted: number): number {
  if (!(wanted > 0)) throw new RangeError('The wanted error must be positive.')
  return Math.max(0, Math.ceil(count * (error / wanted) ** 2 - 1e-9) - count)
}
