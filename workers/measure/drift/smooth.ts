/** A separable Gaussian blur with working memory of its own; edges repeat. The result is overwritten by the next call. */
export function createBlur(width: number, height: number, sigma: number): (image: Float32Array) => Float32Array {
  const reach = Math.ceil(3 * sigma)
  const weights = Float32Array.from({ length: 2 * reach + 1 }, (_, k) => Math.exp(-((k - reach) ** 2) / (2 * sigma * sigma)))
  const total = weights.reduce((sum, weight) => sum + weight, 0)
  for (let k = 0; k < weights.length; k++) weights[k]! /= total
  const rows = new Float32Array(width * height)
  const out = new Float32Array(width * height)
  const clamp = (i: number, length: number) => Math.max(0, Math.min(length - 1, i))
  return (image) => {
    for (let y = 0; y < height; y++) {
      const base = y * width
      for (let x = 0; x < width; x++) {
        let sum = 0
        if (x >= reach && x < width - reach) for (let k = -reach; k <= reach; k++) sum += weights[k + reach]! * image[base + x + k]!
        else for (let k = -reach; k <= reach; k++) sum += weights[k + reach]! * image[base + clamp(x + k, width)]!
        rows[base + x] = sum
      }
    }
    out.fill(0)
    for (let y = 0; y < height; y++) {
      for (let k = -reach; k <= reach; k++) {
        const from = clamp(y + k, height) * width
        const weight = weights[k + reach]!
        for (let x = 0; x < width; x++) out[y * width + x]! += weight * rows[from + x]!
      }
    }
    return out
  }
}
