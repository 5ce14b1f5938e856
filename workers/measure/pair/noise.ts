/** How uncertain a pixel of a stack is at a given brightness over the sky: its variance. */
export interface NoiseModel { (intensity: number): number }

/**
 * Noise of the sky, and half a percent of the light, to which the form of the star image can be known. The speckles that come
 * and go are left out: all components share them, and the shared image takes them up.
 */
export function pixelNoise(sigma: number): NoiseModel {
  return intensity => sigma * sigma + 2.5e-5 * Math.max(0, intensity) ** 2
}

/** Standard deviation of the sky of the mean of two half stacks: half that of their difference, over the darker half of the image. */
export function skyNoise(one: Float32Array, other: Float32Array): number {
  const order = Array.from(one, (value, i) => ({ value: value + other[i]!, i })).sort((a, b) => a.value - b.value)
  const dark = order.slice(0, Math.max(16, order.length >> 1)).map(({ i }) => Math.abs(one[i]! - other[i]!)).sort((a, b) => a - b)
  // Median of absolute values of a normal variable: 0.6745 standard deviations; the mean has half the difference's.
  return dark[dark.length >> 1]! / 0.6745 / 2
}
