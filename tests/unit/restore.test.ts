import { describe, expect, it } from 'vitest'
import { decompose, waveletNoise } from '../../workers/restore/atrous'
import { overshootOf } from '../../workers/restore/guards'
import { ownNoise } from '../../workers/restore/plan'
import { restore } from '../../workers/restore/restore'
import { sharpenPlane } from '../../workers/restore/wavelets'

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

describe('restoration by wavelets', () => {
  const n = 128
  const star = (sigma: number) => Float32Array.from({ length: n * n }, (_, i) => 5000 * Math.exp(-((i % n - 64) ** 2 + (Math.floor(i / n) - 64) ** 2) / (2 * sigma * sigma)))
  const sharpen = (image: Float32Array, gains: number[], thresholds: number[]) => {
    const out = new Float32Array(image.length)
    sharpenPlane(image, n, n, { gains, thresholds }, out)
    return out
  }

  it('changes nothing with gains of one', () => {
    const image = star(3)
    expect(sharpen(image, [], [])).toEqual(image)
    expect(sharpen(image, [1, 1, 1], [0, 0, 0])).toEqual(image)
  })

  it('takes a scale away with a gain of none, whatever the threshold', () => {
    const image = noise(n * n, 8)
    const { details } = decompose(image, n, n, 1)
    sharpen(image, [0], [1e9]).forEach((value, i) => expect(value).toBeCloseTo(image[i]! - details[0]![i]!, 5))
  })

  it('narrows a star, and the guard tells the dark ring it makes', () => {
    const samples = sharpen(star(3), [3, 3, 3], [0, 0, 0])
    const beside = (image: Float32Array) => image[64 * n + 67]! / image[64 * n + 64]!
    expect(beside(samples)).toBeLessThan(0.95 * beside(star(3)))
    const { under } = overshootOf(star(3), samples, n, n, 1, false)
    expect(under).toBeGreaterThan(0.005)
    expect(under).toBeLessThan(0.5)
  })

  it('leaves grain below the threshold as it is; the noise by hand is found in the image', () => {
    const grain = noise(n * n, 3).map(v => v * 7)
    expect(Math.abs(ownNoise(grain, n, n)[0]! / (7 * waveletNoise[0]) - 1)).toBeLessThan(0.03)
    expect(sharpen(grain, [4, 4], [6 * 7, 6 * 7])).toEqual(grain)
    expect(deviation(sharpen(grain, [4, 4], [0, 0]))).toBeGreaterThan(3 * 7)
  })
})

describe('a large image', () => {
  it('comes out tile by tile as in one piece', async () => {
    const width = 1100
    const height = 140
    const image = noise(width * height, 21)
    const how = { gains: [0.5, 3, 2, 1.5, 1.2, 1.1], thresholds: [0, 0.2, 0.1, 0, 0, 0], curve: null, floor: 0, noise: 1 }
    const whole = new Float32Array(width * height)
    sharpenPlane(image, width, height, how, whole)
    const { samples } = await restore(image, width, height, 1, { method: 'wavelets', reason: '', planes: [how], iterations: 0, stopAtNoise: false, strehl: null, apertureOverR0: null }, () => Promise.resolve())
    expect(samples).toEqual(whole)
  })
})

describe('the guard at a limb', () => {
  it('gives the overshoot of an unsharp mask at a blurred edge', () => {
    // An edge of σ = 1 px, y = x + a (x − x ∗ G) with σ = 2 px: overshoot 0.0605, 0.1404, 0.3137 of the step for a = .5, 1, 2
    // (computed from the closed form: 1 + a times the largest excess of one error function over the other).
    const n = 96
    const edge = (sigma: number, at: number) => Float32Array.from({ length: n * n }, (_, i) => 100 + 400 * cumulative(((i % n) - at) / sigma))
    // The rim's top lies 2.181, 1.935, 1.739 px from the edge: where a pixel is.
    for (const [a, known, top] of [[0.5, 0.0605, 2.181], [1, 0.1404, 1.935], [2, 0.3137, 1.739]] as const) {
      const before = edge(1, 48 - top)
      const soft = edge(Math.sqrt(5), 48 - top)
      const { rimBright, rimDark } = overshootOf(before, before.map((v, i) => v + a * (v - soft[i]!)), n, n, 1, true)
      expect(Math.abs(rimBright! / known - 1)).toBeLessThan(0.02)
      // On the dark side the top falls between pixels.
      expect(Math.abs(rimDark! / known - 1)).toBeLessThan(0.2)
    }
    const before = edge(1, 47.5)
    expect(overshootOf(before, before, n, n, 1, true)).toMatchObject({ rimBright: 0, rimDark: 0 })
    expect(overshootOf(before, before, n, n, 1, false).rimBright).toBeNull()
  })
})

/** Normal distribution function by its series about 0 (|x| < 7). */
function cumulative(x: number): number {
  if (x < -6) return 0
  if (x > 6) return 1
  let term = x
  let sum = x
  for (let k = 1; k < 120; k++) {
    term *= -x * x / (2 * k)
    sum += term / (2 * k + 1)
  }
  return 0.5 + sum / Math.sqrt(2 * Math.PI)
}
