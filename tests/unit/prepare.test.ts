import { describe, expect, it } from 'vitest'
import { defaultRecipe } from '../../shared/schemas/recipe'
import { demosaic } from '../../workers/prepare/demosaic'
import { binomial, outPlanes, prepareColour, prepareLuminance } from '../../workers/prepare/frame'
import { findFaultyPixels } from '../../workers/prepare/hotpixels'
import { makePlan } from '../../workers/prepare/plan'
import { gaussianNoise } from './support/noise'

/** One stored frame: stars (Gaussians) at places on a sky with noise. */
function frame(width: number, height: number, stars: { x: number, y: number, peak: number, fwhm: number }[], sky: number, noise: number, random: () => number): Uint16Array<ArrayBuffer> {
  const out = new Uint16Array(width * height)
  for (let y = 0; y < height; y++) {
    for (let x = 0; x < width; x++) {
      let v = sky + noise * random()
      for (const s of stars) v += s.peak * Math.exp(-4 * Math.LN2 * ((x - s.x) ** 2 + (y - s.y) ** 2) / s.fwhm ** 2)
      out[y * width + x] = Math.max(0, Math.round(v))
    }
  }
  return out
}

describe('Malvar-He-Cutler demosaicing (coefficients of ICASSP 2004, III-485; worked numbers computed independently)', () => {
  const width = 13
  const height = 13
  const planes = (raw: Float32Array, pattern: 'RGGB' | 'BGGR' | 'GRBG' | 'GBRG' = 'RGGB') => {
    const out = new Float32Array(3 * width * height)
    demosaic(raw, width, height, pattern, out)
    return (plane: number, x: number, y: number) => out[plane * width * height + y * width + x]!
  }

  it('spreads an impulse of 16 at a red site as published', () => {
    const raw = new Float32Array(width * height)
    raw[6 * width + 6] = 16
    const at = planes(raw)
    expect([-2, -1, 0, 1, 2].map(dx => at(1, 6 + dx, 6))).toEqual([-2, 0, 8, 0, -2])
    expect(at(2, 6, 6)).toBe(12)
    expect(at(0, 7, 6)).toBe(8)
    expect(at(0, 7, 7)).toBe(4)
  })

  it.each(['RGGB', 'GRBG', 'GBRG', 'BGGR'] as const)('reproduces three independent ramps of a %s mosaic away from the border', (pattern) => {
    const ramp = [(x: number, y: number) => 3 * x + 5 * y + 7, (x: number, y: number) => -2 * x + y + 90, (x: number, y: number) => x - 4 * y + 200]
    const red = { RGGB: [0, 0], GRBG: [1, 0], GBRG: [0, 1], BGGR: [1, 1] }[pattern]
    const colour = (x: number, y: number) => {
      const rx = (x & 1) === red[0]
      const ry = (y & 1) === red[1]
      return rx && ry ? 0 : !rx && !ry ? 2 : 1
    }
    const raw = Float32Array.from({ length: width * height }, (_, i) => ramp[colour(i % width, Math.floor(i / width))]!(i % width, Math.floor(i / width)))
    const at = planes(raw, pattern)
    for (let y = 2; y < height - 2; y++) {
      for (let x = 2; x < width - 2; x++) for (let p = 0; p < 3; p++) expect(at(p, x, y)).toBeCloseTo(ramp[p]!(x, y), 4)
    }
  })

  it('has the noise gains 0.7500, 0.9961 and 0.9763', () => {
    const random = gaussianNoise(5)
    const n = 200
    const raw = Float32Array.from({ length: n * n }, () => random())
    const out = new Float32Array(3 * n * n)
    demosaic(raw, n, n, 'RGGB', out)
    const deviation = (plane: number, px: number, py: number) => {
      let sum = 0
      let count = 0
      for (let y = 2 + py; y < n - 2; y += 2) for (let x = 2 + px; x < n - 2; x += 2) { sum += out[plane * n * n + y * n + x]! ** 2; count++ }
      return Math.sqrt(sum / count)
    }
    // Ten thousand samples of each kind: the estimate is good to 1 %, neighbours' correlation included.
    for (const [gain, of] of [[0.75, deviation(1, 0, 0)], [0.9961, deviation(0, 1, 0)], [0.9763, deviation(0, 1, 1)]] as const) expect(Math.abs(of / gain - 1)).toBeLessThan(0.03)
  })
})

describe('luminance', () => {
  it('of a mosaic of flat colour is (R + 2G + B)/4 everywhere, edges included', () => {
    const width = 9
    const height = 7
    const raw = Float32Array.from({ length: width * height }, (_, i) => {
      const x = i % width
      const y = Math.floor(i / width)
      return (y & 1) === 0 ? ((x & 1) === 0 ? 100 : 40) : ((x & 1) === 0 ? 40 : 20)
    })
    const out = new Float32Array(width * height)
    binomial(raw, width, height, out)
    for (const v of out) expect(v).toBeCloseTo((100 + 80 + 20) / 4, 5)
  })

  it('counts clipped samples but not hot ones, and repairs before anything is judged', () => {
    const random = gaussianNoise(1)
    const frames = Array.from({ length: 16 }, (_, k) => {
      const f = frame(24, 20, [{ x: 8 + 0.3 * k, y: 9, peak: 4000, fwhm: 4 }], 500, 10, random)
      f[5 * 24 + 18] = 65535
      return f
    })
    const plan = makePlan({ width: 24, height: 20, planes: 1, mosaic: 'none', saturation: 65535 }, frames, defaultRecipe)
    expect([...plan.hotPixels]).toEqual([5 * 24 + 18])
    const out = new Float32Array(24 * 20)
    expect(prepareLuminance(frames[0]!, 0, plan, out)).toBe(0)
    expect(out[5 * 24 + 18]).toBeGreaterThan(450)
    expect(out[5 * 24 + 18]).toBeLessThan(560)
    frames[0]![3] = 65535
    expect(prepareLuminance(frames[0]!, 0, plan, out)).toBe(1)
    const off = makePlan({ width: 24, height: 20, planes: 1, mosaic: 'none', saturation: null }, frames, { prepare: { repairHotPixels: false } })
    prepareColour(frames[0]!, 0, off, out)
    expect(outPlanes(off)).toBe(1)
    expect(out[5 * 24 + 18]).toBe(65535)
  })
})

describe('hot and dead pixels', () => {
  const size = 48
  const capture = (stars: (k: number) => { x: number, y: number, peak: number, fwhm: number }[], faults: [number, number, number][], seed: number) => {
    const random = gaussianNoise(seed)
    return Array.from({ length: 32 }, (_, k) => {
      const f = frame(size, size, stars(k), 800, 12, random)
      for (const [x, y, add] of faults) f[y * size + x] = Math.max(0, f[y * size + x]! + add)
      return f
    })
  }
  const found = (frames: Uint16Array<ArrayBuffer>[], mosaic: 'none' | 'RGGB' = 'none') =>
    [...findFaultyPixels(frames, size, size, 1, mosaic).hotPixels].map(i => [i % size, Math.floor(i / size)])

  it.each([1.3, 1.8, 2.5, 4, 8])('leaves a star of %d px alone that stands still to a fifth of a pixel', (fwhm) => {
    const wobble = gaussianNoise(9)
    expect(found(capture(() => [{ x: 24 + 0.2 * wobble(), y: 23 + 0.2 * wobble(), peak: 9000 * (1 + 0.3 * wobble()), fwhm }], [], 3))).toEqual([])
  })
  it('finds hot pixels beside, in the flank of and under a standing star, in a corner, a dead one, and two together', () => {
    const wobble = gaussianNoise(2)
    const faults: [number, number, number][] = [[0, 0, 300], [40, 8, 200], [24, 20, 9000], [24, 26, 3000], [30, 40, -600], [10, 30, 500], [11, 30, 400]]
    const frames = capture(() => [{ x: 24 + 0.3 * wobble(), y: 23 + 0.3 * wobble(), peak: 9000, fwhm: 4.5 }], faults, 4)
    expect(found(frames).map(String).sort()).toEqual(faults.map(([x, y]) => String([x, y])).sort())
  })
  it('repairs from sound pixels of the same colour only', () => {
    const frames = capture(() => [], [[20, 20, 2000], [22, 20, 2000]], 6)
    const { hotPixels, repairFrom } = findFaultyPixels(frames, size, size, 1, 'RGGB')
    expect([...hotPixels]).toEqual([20 * size + 20, 20 * size + 22])
    for (const from of repairFrom) {
      expect([(from % size) & 1, Math.floor(from / size) & 1]).toEqual([0, 0])
      expect([...hotPixels]).not.toContain(from)
    }
  })
})
