import fc from 'fast-check'
import { describe, expect, it } from 'vitest'
import { defaultRecipe } from '../../shared/schemas/recipe'
import { blurNoiseGain, createWindowBlur, gaussianKernel, laplacianNoiseGain } from '../../workers/score/blur'
import { laplacianVariance, quadraticPeak } from '../../workers/score/measures'
import { frameNoise } from '../../workers/score/noise'
import { makeScorePlan } from '../../workers/score/plan'
import { createScorer, emptyScore } from '../../workers/score/scorer'
import { survey } from '../../workers/score/survey'
import type { FrameScore } from '../../workers/score/types'
import { gaussianNoise, uniform } from './support/noise'

describe('variance of the Laplacian (Pech-Pacheco et al. 2000)', () => {
  it('of an impulse in 5 × 5 is 20/9', () => {
    const image = new Float32Array(25)
    image[12] = 1
    expect(laplacianVariance(image, 5, 5)).toBeCloseTo(20 / 9, 12)
  })
  it.each([0, 0.7, 1, 2])('of white noise smoothed with sigma %d is what its kernel says; 20 without smoothing', (sigma) => {
    const random = gaussianNoise(11)
    const n = 300
    const noise = Float32Array.from({ length: n * n }, () => random())
    const smooth = new Float32Array(n * n)
    createWindowBlur(sigma, n, n).blur(noise, n, n, 0, 0, n, n, smooth)
    expect(Math.abs(laplacianVariance(smooth, n, n) / laplacianNoiseGain(sigma) - 1)).toBeLessThan(0.04)
    if (sigma === 0) expect(laplacianNoiseGain(0)).toBe(20)
    const rms = Math.sqrt(smooth.reduce((s, v) => s + v * v, 0) / smooth.length)
    expect(Math.abs(rms / blurNoiseGain(sigma) - 1)).toBeLessThan(0.04)
  })
})

describe('smoothing', () => {
  it('keeps a flat image and the sum of the kernel', () => {
    for (const sigma of [0.5, 0.7, 1, 1.7, 3]) {
      const k = gaussianKernel(sigma)
      expect(k[0]! + 2 * k.slice(1).reduce((s, v) => s + v, 0)).toBeCloseTo(1, 12)
      const flat = new Float32Array(20 * 12).fill(77)
      const out = new Float32Array(20 * 12)
      createWindowBlur(sigma, 20, 12).blur(flat, 20, 12, 0, 0, 20, 12, out)
      for (const v of out) expect(v).toBeCloseTo(77, 4)
    }
  })
  it('finds the top of a paraboloid exactly', () => {
    fc.assert(fc.property(fc.double({ min: -0.49, max: 0.49, noNaN: true }), fc.double({ min: -0.49, max: 0.49, noNaN: true }), (dx, dy) => {
      const image = Float32Array.from({ length: 49 }, (_, i) => 100 - ((i % 7) - 3 - dx) ** 2 - 2 * (Math.floor(i / 7) - 3 - dy) ** 2 - 0.5 * ((i % 7) - 3 - dx) * (Math.floor(i / 7) - 3 - dy))
      const peak = { x: 0, y: 0, value: 0 }
      quadraticPeak(image, 7, 7, peak)
      expect(peak.x).toBeCloseTo(3 + dx, 3)
      expect(peak.y).toBeCloseTo(3 + dy, 3)
      expect(peak.value).toBeCloseTo(100, 3)
    }))
  })
})

const SIZE = 96
/** A star of speckles: Gaussians of the same width on a broad halo; sharpness is the share of light in the first. */
function star(x: number, y: number, sharp: number, flux: number, noise: number, random: () => number, sky = 300): Float32Array {
  const out = new Float32Array(SIZE * SIZE)
  const spot = (i: number, cx: number, cy: number, fwhm: number) => 4 * Math.LN2 / Math.PI / fwhm ** 2 * Math.exp(-4 * Math.LN2 * (((i % SIZE) - cx) ** 2 + (Math.floor(i / SIZE) - cy) ** 2) / fwhm ** 2)
  for (let i = 0; i < out.length; i++) out[i] = sky + flux * (sharp * spot(i, x, y, 3.4) + (1 - sharp) * spot(i, x, y, 17)) + noise * random()
  return out
}

describe('scoring stars', () => {
  const random = gaussianNoise(21)
  const pick = uniform(22)
  const frames = Array.from({ length: 40 }, () => {
    const sharp = 0.1 + 0.4 * pick()
    return { sharp, image: star(48 + 6 * (pick() - 0.5), 47 + 6 * (pick() - 0.5), sharp, 60_000, 6, random) }
  })
  const found = survey(frames.map(f => f.image), SIZE, SIZE)
  const plan = makeScorePlan(found, defaultRecipe, SIZE, SIZE)
  const scorer = createScorer(plan)
  const score = (image: Float32Array, clipped = 0): FrameScore => {
    const out = emptyScore()
    scorer.score(image, clipped, out)
    return out
  }

  it('is recognised as a star with signal, its noise and sampling measured', () => {
    expect(found.form).toBe('star')
    expect(found.noSignal).toBe(false)
    expect(Math.abs(found.noise / 6 - 1)).toBeLessThan(0.08)
    expect(found.detailPx).toBeGreaterThan(2.7)
    expect(found.detailPx).toBeLessThan(4.5)
    expect([64, 128]).toContain(found.windowPx)
  })
  it('ranks by sharpness', () => {
    const order = (by: 'peak' | 'laplacian') => frames.map(f => ({ sharp: f.sharp, value: score(f.image)[by] })).sort((a, b) => a.value - b.value).map(f => f.sharp)
    for (const by of ['peak', 'laplacian'] as const) {
      const sorted = order(by)
      let wrong = 0
      for (let i = 1; i < sorted.length; i++) if (sorted[i]! < sorted[i - 1]! - 0.01) wrong++
      expect(wrong).toBe(0)
    }
  })
  it('does not let a cloud rank frames: half and a fifth of the light score the same', () => {
    for (const light of [0.5, 0.2]) {
      const clear = score(star(48, 47, 0.3, 60_000, 6, gaussianNoise(5)))
      const dim = score(star(48, 47, 0.3, 60_000 * light, 6, gaussianNoise(5)))
      expect(Math.abs(dim.peak / clear.peak - 1)).toBeLessThan(0.06)
      expect(Math.abs(dim.laplacian / clear.laplacian - 1)).toBeLessThan(0.2)
    }
  })
  it('does not let a second star that drifts out of the field rank frames', () => {
    const neighbour = (x: number) => {
      const image = star(40, 47, 0.3, 60_000, 6, gaussianNoise(5))
      const other = star(x, 12, 0.3, 20_000, 0, () => 0, 0)
      return image.map((v, i) => v + other[i]!)
    }
    const inside = score(neighbour(88))
    const outside = score(neighbour(130))
    expect(Math.abs(inside.peak / outside.peak - 1)).toBeLessThan(0.03)
  })
  it('tells the place to a few hundredths of a pixel', () => {
    fc.assert(fc.property(fc.double({ min: 30, max: 60, noNaN: true }), fc.double({ min: 30, max: 60, noNaN: true }), (x, y) => {
      const at = score(star(x, y, 0.5, 60_000, 0, () => 0))
      expect(Math.hypot(at.x - x, at.y - y)).toBeLessThan(0.06)
    }), { numRuns: 40 })
  })
  it('sets aside empty, saturated and cut-off frames', () => {
    expect(score(star(48, 47, 0.3, 0, 6, random)).empty).toBe(true)
    expect(score(frames[0]!.image, 5).saturated).toBe(true)
    expect(score(frames[0]!.image, 1).saturated).toBe(false)
    expect(score(star(0.5, 47, 0.5, 60_000, 6, random)).outOfField).toBe(true)
    expect(score(frames[0]!.image)).toMatchObject({ empty: false, saturated: false, outOfField: false })
  })
  it('gives a frame the same bits whatever was scored before', () => {
    const fresh = createScorer(plan)
    const out = emptyScore()
    fresh.score(frames[7]!.image, 0, out)
    score(frames[3]!.image)
    expect(score(frames[7]!.image)).toEqual(out)
  })
})

describe('a capture of nothing (alignment on noise: cf. Henderson 2013, PNAS 110, 18037)', () => {
  it.each([0, 5])('is called that, with hot pixels of %d sigma left in it', (hot) => {
    const random = gaussianNoise(31)
    const frames = Array.from({ length: 48 }, () => Float32Array.from({ length: 64 * 64 }, (_, i) => 500 + 10 * random() + (i === 777 ? 10 * hot : 0)))
    const found = survey(frames, 64, 64)
    expect(found.noSignal).toBe(true)
    expect(found.noSignalText).toContain('No signal')
  })
  it('and a faint star that single frames show is not', () => {
    const random = gaussianNoise(32)
    const frames = Array.from({ length: 48 }, () => star(48 + random(), 47 + random(), 0.4, 3000, 6, random))
    expect(survey(frames, SIZE, SIZE).noSignal).toBe(false)
  })
})

describe('noise of a frame', () => {
  it.each([0.4, 1, 3, 20])('finds %d units under whole-number samples', (sigma) => {
    const random = gaussianNoise(41)
    const frame = Float32Array.from({ length: 128 * 128 }, () => Math.round(100 + sigma * random()))
    const truth = Math.sqrt(sigma ** 2 + 1 / 12)
    expect(Math.abs(frameNoise(frame, 128, 128, 1) / truth - 1)).toBeLessThan(0.2)
  })
})
