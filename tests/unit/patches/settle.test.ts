import { describe, expect, it } from 'vitest'
import { createRandom } from '../../../workers/rehearse/random'
import { placePatches } from '../../../workers/patches/place'
import { agreement, centred, covariances, estimate, lessMean, meanWeights, ownVariances } from '../../../workers/patches/settle'

const places = Array.from({ length: 30 }, (_, k) => ({ x: 16 + 32 * (k % 6), y: 16 + 32 * Math.floor(k / 6) }))
const FRAMES = 150

/** A smooth field of known variance, alike over some 80 px as air over a few kilometres is: plane waves, others in each frame, and noise on each patch. */
function field(signal: number, noise: (place: number) => number) {
  const truth = new Float32Array(FRAMES * places.length)
  const seen = new Float32Array(FRAMES * places.length)
  for (let f = 0; f < FRAMES; f++) {
    const random = createRandom(5, f)
    const waves = Array.from({ length: 6 }, () => ({ kx: 0.012 * random.normal(), ky: 0.012 * random.normal(), phase: 2 * Math.PI * random.uniform() }))
    const row = places.map(({ x, y }) => signal / Math.sqrt(3) * waves.reduce((sum, w) => sum + Math.cos(w.kx * x + w.ky * y + w.phase), 0))
    const mean = row.reduce((a, b) => a + b, 0) / row.length
    row.forEach((value, p) => {
      truth[f * places.length + p] = value - mean
      seen[f * places.length + p] = value - mean + noise(p) * random.normal()
    })
  }
  return { truth, seen }
}

function judge(seen: Float32Array) {
  const raw = centred(seen, FRAMES, places.length).values
  const trust = meanWeights([raw], FRAMES, places.length)
  const { values } = centred(lessMean(raw, FRAMES, places.length, trust), FRAMES, places.length)
  const both = covariances([values], FRAMES, places.length)
  const agreed = agreement(both, places, 57, trust)
  return { agreed, made: estimate(values, FRAMES, places, places, agreed, ownVariances(both, places.length), trust) }
}
/** Differences from the truth, up to a shift of the whole frame, which is the frame's own; frames × places without one place. */
function errors(values: Float32Array, truth: Float32Array, without = -1): Float32Array {
  const out = values.map((value, i) => value - truth[i]!)
  const n = places.length
  for (let f = 0; f < FRAMES; f++) {
    let sum = 0
    for (let p = 0; p < n; p++) if (p !== without) sum += out[f * n + p]!
    for (let p = 0; p < n; p++) out[f * n + p]! -= sum / (n - Number(without >= 0))
  }
  return out
}
const rms = (values: ArrayLike<number>) => Math.sqrt(Array.from(values).reduce((sum, v) => sum + v * v, 0) / values.length)

describe('patches together', () => {
  it('see air that differs, and estimate it better than each by itself', () => {
    const { truth, seen } = field(0.8, () => 0.6)
    const { agreed, made } = judge(seen)
    expect(agreed.variance).toBeGreaterThan(3 * agreed.error)
    const before = rms(errors(seen, truth))
    const after = rms(errors(made, truth))
    expect(after).toBeLessThan(0.7 * before)
  })

  it('see nothing in noise alone', () => {
    const { seen } = field(0, () => 0.6)
    const { agreed } = judge(seen)
    expect(agreed.variance).toBeLessThan(3 * agreed.error)
  })

  it('lead a patch without structure by its neighbours', () => {
    const blind = 14
    const { truth, seen } = field(0.8, p => (p === blind ? 30 : 0.2))
    const { made } = judge(seen)
    const at = (values: Float32Array) => Array.from({ length: FRAMES }, (_, f) => values[f * places.length + blind]!)
    const left = rms(at(errors(made, truth, blind)))
    expect(left).toBeLessThan(0.7 * rms(at(truth)))
  })
})

describe('placing', () => {
  it('takes structure and leaves the plain', () => {
    const width = 192
    const height = 160
    const random = createRandom(3, 1)
    const image = Float32Array.from({ length: width * height }, (_, i) => {
      const x = i % width
      return 200 + random.normal() + (x < 96 ? 60 * Math.sin(0.5 * x) * Math.sin(0.4 * Math.floor(i / width)) : 0)
    })
    const found = placePatches(image, width, height, places, 32, 1)
    expect(found.length).toBeGreaterThan(10)
    expect(found.every(place => place.x < 110)).toBe(true)
  })
})
