/** Several measures of one quantity together. */

export interface Measured { value: number, err: number }

/**
 * The mean weighted by 1/σ². Where the values scatter by more than their errors say, the error grows by the square root of
 * chi-squared over its degrees of freedom (the usual scale factor, e.g. Particle Data Group, Review of Particle Physics,
 * introduction; from memory).
 */
export function weightedMean(values: readonly Measured[]): Measured & { chiSquared: number } {
  const weights = values.map(({ err }) => 1 / (err * err))
  const total = weights.reduce((sum, weight) => sum + weight, 0)
  const value = values.reduce((sum, one, k) => sum + weights[k]! * one.value, 0) / total
  const chiSquared = values.reduce((sum, one, k) => sum + weights[k]! * (one.value - value) ** 2, 0)
  const freedom = values.length - 1
  return { value, chiSquared, err: Math.sqrt(Math.max(1, freedom > 0 ? chiSquared / freedom : 1) / total) }
}
