import { describe, expect, it } from 'vitest'
import { decompose, waveletNoise } from '../../workers/restore/atrous'
import { restore } from '../../workers/restore/restore'

/** Normal deviates from a seeded generator (mulberry32 and Box-Muller). */
function noise(n: number, seed: number): Float32Array {
  let state = seed
  const uniform = () => {
    state = (state + 0x6d2b79f5) | 0
    let t = Math.imul(state ^ (state >>> 15), 1 | state)
    t = (t + Math.imul(t ^ (t >>> 7), 61 | t)) ^ t
    return ((t ^ (t >>> 14)) >>> 0) / 4294967296
  }
  return Float32Array.from({ length: n }, () => Math.sqrt(-2 * Math.log(1 - uniform())) * Math.cos(2 * Math.PI * uniform()))
}

const deviation = (values: Float32Array) => Math.sqrt(values.reduce((sum, v) => sum + v * v, 0) / values.length)

describe('à trous wavelets', () => {
  it('give the spline and its detail for an impulse (16 in one dimension: 1 4 6 4 1 and -1 -4 10 -4 -1)', () => {
    const n = 33
    const image = new Float32Array(n * n)
    // Constant along y, so that the transform is one-dimensional.
    for (let y = 0; y < n; y++) image[y * n + 16] = 16
    const { details, smooth } = decompose(image, n, n, 1)
    expect([...smooth.subarray(16 * n + 14, 16 * n + 19)]).toEqual([1, 4, 6, 4, 1])
    expect([...details[0]!.subarray(16 * n + 14, 16 * n + 19)]).toEqual([-1, -4, 10, -4, -1])
  })

  it('sum to the image', () => {
    const image = noise(64 * 48, 5)
    const { details, smooth } = decompose(image, 64, 48, 5)
    image.forEach((value, i) => expect(details.reduce((sum, w) => sum + w[i]!, smooth[i]!)).toBeCloseTo(value, 5))
  })

  it('have the noise of the published table: Starck & Murtagh, 0.890 0.201 0.086 0.042 0.021', () => {
    const { details } = decompose(noise(512 * 512, 11), 512, 512, 4)
    details.forEach((w, j) => expect(Math.abs(deviation(w) / waveletNoise[j]! - 1)).toBeLessThan(0.03))
    const published = [0.89, 0.201, 0.086, 0.042, 0.021]
    published.forEach((value, j) => expect(Math.abs(waveletNoise[j]! - value)).toBeLessThanOrEqual(0.00091))
  })
})

describe('restoration', () => {
  const n = 128
  const star = (sigma: number) => Float32Array.from({ length: n * n }, (_, i) => 5000 * Math.exp(-((i % n - 64) ** 2 + (Math.floor(i / n) - 64) ** 2) / (2 * sigma * sigma)))

  it('changes nothing with no scales or a gain of one', () => {
    const image = star(3)
    expect(restore(image, n, n, 1, { scales: 0, gain: 3, thresholdSigma: 3 }).samples).toEqual(image)
    expect(restore(image, n, n, 1, { scales: 3, gain: 1, thresholdSigma: 0 }).samples).toEqual(image)
  })

  it('narrows a star and reports the dark ring it makes', () => {
    const { samples, overshoot } = restore(star(3), n, n, 1, { scales: 3, gain: 3, thresholdSigma: 0 })
    const beside = (image: Float32Array) => image[64 * n + 67]! / image[64 * n + 64]!
    expect(beside(samples)).toBeLessThan(0.95 * beside(star(3)))
    expect(overshoot.under).toBeGreaterThan(0.005)
    expect(overshoot.under).toBeLessThan(0.5)
  })

  it('finds the noise and leaves grain below the threshold as it is', () => {
    const grain = noise(n * n, 3).map(v => v * 7)
    const { samples, noise: sigma } = restore(grain, n, n, 1, { scales: 2, gain: 4, thresholdSigma: 6 })
    expect(Math.abs(sigma[0]! / 7 - 1)).toBeLessThan(0.03)
    expect(samples).toEqual(grain)
    expect(deviation(restore(grain, n, n, 1, { scales: 2, gain: 4, thresholdSigma: 0 }).samples)).toBeGreaterThan(3 * 7)
  })
})
