import fc from 'fast-check'
import { describe, expect, it } from 'vitest'
import { createForward, createInverse, createTransform, multiply, spectrumLength } from '../../workers/register/fft2'
import { createNewton, highest } from '../../workers/register/maximum'
import { nextReferenceFrames, starImages } from '../../workers/register/reference'
import { createRegistrar, emptyShift } from '../../workers/register/registrar'
import { settleShifts } from '../../workers/register/settle'
import type { RegisterPlan } from '../../workers/register/types'
import { gaussianNoise, uniform } from './support/noise'

/** A band-limited scene: Gaussian blobs of FWHM 4-9 px at random places, drawn at any sub-pixel shift. */
function scene(seed: number, count: number, width: number, height: number, least = 4): (dx: number, dy: number) => Float32Array {
  const random = uniform(seed)
  const blobs = Array.from({ length: count }, () => ({ x: random() * width, y: random() * height, peak: 50 + 200 * random(), s: (least + 5 * random()) / 2.3548 }))
  return (dx, dy) => Float32Array.from({ length: width * height }, (_, i) => {
    const x = i % width
    const y = Math.floor(i / width)
    return blobs.reduce((sum, b) => sum + b.peak * Math.exp(-((x - b.x - dx) ** 2 + (y - b.y - dy) ** 2) / 2 / b.s ** 2), 100)
  })
}

describe('transforms of real windows', () => {
  it('are the plain discrete Fourier sum, and back', () => {
    const n = 16
    const cut = 5
    const random = uniform(3)
    const window = Float32Array.from({ length: n * n }, () => random())
    const out = new Float64Array(spectrumLength(cut))
    createForward(n, cut).forward(window, out)
    for (const [kx, ky] of [[0, 0], [3, -5], [5, 4], [0, -2]] as const) {
      let re = 0
      let im = 0
      for (let i = 0; i < n * n; i++) {
        const angle = -2 * Math.PI * (kx * (i % n) + ky * Math.floor(i / n)) / n
        re += window[i]! * Math.cos(angle)
        im += window[i]! * Math.sin(angle)
      }
      const o = 2 * (kx * (2 * cut + 1) + ky + cut)
      expect(out[o]).toBeCloseTo(re, 5)
      expect(out[o + 1]).toBeCloseTo(im, 5)
    }
    const inverse = createInverse(n, cut)
    const map = new Float32Array(inverse.side ** 2)
    inverse.inverse(out, map)
    const again = new Float64Array(spectrumLength(cut))
    createForward(inverse.side, cut).forward(map, again)
    const scale = (n / inverse.side) ** 2
    for (let o = 0; o < out.length; o++) expect(again[o]! * scale).toBeCloseTo(out[o]!, 3)
  })
  it('have tables that agree with the engine to 1e-15', () => {
    const { table } = createTransform(64) as unknown as { table: number[] }
    for (let i = 0; i < table.length; i += 2) expect(Math.abs(table[i]! - Math.cos(Math.PI * i / 64))).toBeLessThan(1e-15)
  })
})

describe('sub-pixel maximum of a correlation (Guizar-Sicairos, Thurman & Fienup 2008: an upsampled DFT finds it exactly)', () => {
  it.each([[2.37, -1.62], [-22.4, 13.32], [0.5, 0.5], [-0.25, 7.75]])('of a 64 × 64 scene of two blobs shifted by (%d, %d)', (dx, dy) => {
    const n = 64
    const cut = 31
    const blob = (sx: number, sy: number) => Float32Array.from({ length: n * n }, (_, i) => {
      const wrap = (d: number) => d - n * Math.round(d / n)
      const one = (cx: number, cy: number, s: number) => Math.exp(-(wrap((i % n) - cx - sx) ** 2 + wrap(Math.floor(i / n) - cy - sy) ** 2) / 2 / s ** 2)
      return one(25, 30, 2.2) + 0.6 * one(38, 35, 3)
    })
    const forward = createForward(n, cut)
    const a = new Float64Array(spectrumLength(cut))
    const b = new Float64Array(spectrumLength(cut))
    forward.forward(blob(dx, dy), a)
    forward.forward(blob(0, 0), b)
    for (let o = 1; o < b.length; o += 2) b[o]! *= -1
    multiply(a, b, a)
    const inverse = createInverse(n, cut)
    const map = new Float32Array(inverse.side ** 2)
    inverse.inverse(a, map)
    const found = { x: 0, y: 0, value: 0 }
    highest(map, inverse.side, n / inverse.side, 0, 0, 31, found)
    createNewton(cut, n)(a, n / inverse.side, found)
    expect(found.x).toBeCloseTo(dx, 4)
    expect(found.y).toBeCloseTo(dy, 4)
  })
})

const shape = { width: 96, height: 80, windowPx: 64 }
function registrar(over: Partial<RegisterPlan> & Pick<RegisterPlan, 'form' | 'reference' | 'refX' | 'refY'>) {
  return createRegistrar({ ...shape, method: 'correlation', blurPx: 0.7, noise: 0.01, ...over })
}

describe('registration', () => {
  it.each(['field', 'disc'] as const)('recovers any shift of a %s, both signs, without pulling toward whole pixels', (form) => {
    const draw = scene(5, 60, shape.width, shape.height)
    const register = registrar({ form, reference: draw(0, 0), refX: 47.5, refY: 39.5 })
    fc.assert(fc.property(fc.double({ min: -6, max: 6, noNaN: true }), fc.double({ min: -6, max: 6, noNaN: true }), (x, y) => {
      const out = emptyShift()
      register.register(draw(x, y), 47.5, 39.5, out)
      expect(Math.abs(out.dx + x)).toBeLessThan(0.12)
      expect(Math.abs(out.dy + y)).toBeLessThan(0.12)
      expect(out.sure).toBe(true)
    }), { numRuns: 25 })
  })

  const double = (x: number, y: number, swap = false) => Float32Array.from({ length: shape.width * shape.height }, (_, i) => {
    const spot = (cx: number, cy: number) => Math.exp(-4 * Math.LN2 * (((i % shape.width) - cx) ** 2 + (Math.floor(i / shape.width) - cy) ** 2) / 9)
    return 50 + 900 * spot(x, y) * (swap ? 0.9 : 1) + 900 * spot(x + 9.3, y + 4.1) * (swap ? 1 : 0.8)
  })

  it('of a double follows the first star even where the second is momentarily brighter', () => {
    const register = registrar({ form: 'star', reference: double(44, 38), refX: 44, refY: 38, noise: 1 })
    fc.assert(fc.property(fc.double({ min: 30, max: 56, noNaN: true }), fc.double({ min: 28, max: 48, noNaN: true }), fc.boolean(), (x, y, swap) => {
      const out = emptyShift()
      const seen = swap ? { x: x + 9.3, y: y + 4.1 } : { x, y }
      register.register(double(x, y, swap), seen.x, seen.y, out)
      expect(Math.abs(out.dx - (44 - x))).toBeLessThan(0.05)
      expect(Math.abs(out.dy - (38 - y))).toBeLessThan(0.05)
    }), { numRuns: 40 })
  })
  it('by brightest speckle and by centroid, where the recipe asks for them', () => {
    const out = emptyShift()
    registrar({ form: 'star', method: 'speckle', reference: double(44, 38), refX: 44, refY: 38 }).register(double(40, 41), 40, 41, out)
    expect([out.dx, out.dy]).toEqual([4, -3])
    registrar({ form: 'star', method: 'centroid', reference: double(44, 38), refX: 44, refY: 38, noise: 1 }).register(double(40.4, 41.3), 40.4, 41.3, out)
    expect(out.dx).toBeCloseTo(3.6, 1)
    expect(out.dy).toBeCloseTo(-3.3, 1)
  })
  it('is not sure of noise, nor of two equal speckles', () => {
    const random = gaussianNoise(8)
    const out = emptyShift()
    const register = registrar({ form: 'star', reference: Float32Array.from(double(44, 38), (v, i) => (i % shape.width > 48 ? 50 : v)), refX: 44, refY: 38, noise: 10 })
    register.register(Float32Array.from({ length: shape.width * shape.height }, () => 50 + 10 * random()), 44, 38, out)
    expect(out.sure).toBe(false)
    const straight = double(44, 38)
    const twins = double(44, 38, true).map((v, i) => Math.max(v, straight[i]!))
    register.register(twins, 44, 38, out)
    expect(out.sure).toBe(false)
    register.register(double(44, 38), 44, 38, out)
    expect(out.confidence).toBeGreaterThan(0)
  })
  it('gives transfer 1 for the reference itself and less for a blurred frame, whatever the light', () => {
    const sharp = scene(9, 90, shape.width, shape.height, 3)(0, 0)
    const register = registrar({ form: 'field', reference: sharp, refX: 47.5, refY: 39.5 })
    const out = emptyShift()
    register.register(sharp, 47.5, 39.5, out)
    expect(out.transfer).toBeCloseTo(1, 2)
    const soft = sharp.map((_, i) => [-1, 0, 1].reduce((s, j) => s + [-1, 0, 1].reduce((t, k) => t + (sharp[i + j * shape.width + k] ?? 100) / 9, 0), 0))
    register.register(soft, 47.5, 39.5, out)
    expect(out.transfer).toBeLessThan(0.9)
    expect(out.transfer).toBeGreaterThan(0.2)
  })
  it('gives the same bits whatever was registered before', () => {
    const draw = scene(12, 40, shape.width, shape.height)
    const plan = { form: 'field' as const, reference: draw(0, 0), refX: 47.5, refY: 39.5 }
    const one = registrar(plan)
    const other = registrar(plan)
    const a = emptyShift()
    const b = emptyShift()
    one.register(draw(3.3, -2.2), 47.5, 39.5, a)
    other.register(draw(-1, 1), 50, 41, b)
    other.register(draw(3.3, -2.2), 47.5, 39.5, b)
    expect(b).toEqual(a)
  })
})

describe('the reference', () => {
  it('of a hierarchical triple shows its two bright stars and not the halo', () => {
    const width = 64
    const image = Float32Array.from({ length: width * width }, (_, i) => {
      const spot = (x: number, y: number, f: number) => Math.exp(-4 * Math.LN2 * (((i % width) - x) ** 2 + (Math.floor(i / width) - y) ** 2) / f ** 2)
      return 10 + 100 * (spot(25, 30, 3) + 0.4 * spot(25, 30, 20)) + 60 * (spot(43.5, 33.2, 3) + 0.4 * spot(43.5, 33.2, 20))
    })
    const stars = starImages(image, width, width, 25, 30, 0.7, 64)
    expect(stars).toHaveLength(2)
    expect(stars[0]!.x).toBeCloseTo(25, 1)
    expect(stars[1]!.x).toBeCloseTo(43.5, 1)
    expect(stars[1]!.y).toBeCloseTo(33.2, 1)
    expect(stars[1]!.weight).toBeGreaterThan(0.5)
    expect(stars[1]!.weight).toBeLessThan(0.7)
  })
  it('takes the best share, and never so few that one frame decides', () => {
    const ranked = Array.from({ length: 500 }, (_, i) => 499 - i)
    expect([...nextReferenceFrames(ranked, 0.05)]).toEqual(ranked.slice(0, 25))
    expect(nextReferenceFrames(ranked, 0.001)).toHaveLength(8)
    expect(nextReferenceFrames([3, 1], 0.5)).toHaveLength(2)
    expect(nextReferenceFrames([], 0.5)).toHaveLength(0)
  })
})

describe('a second look at the shifts', () => {
  it('follows drift of hundreds of pixels and a bump, and throws out what jumps alone', () => {
    const random = gaussianNoise(2)
    const n = 200
    const dx = Float64Array.from({ length: n }, (_, i) => 2 * i + 0.5 * random() + (i >= 120 ? 40 : 0))
    const dy = Float64Array.from({ length: n }, (_, i) => -i + 0.5 * random())
    dx[50]! += 25
    dy[80]! -= 18
    const sure = new Uint8Array(n).fill(1)
    sure[90] = 0
    const unsure = settleShifts({ dx, dy, confidence: new Float64Array(n).fill(1), sure }, 8)
    expect([...unsure.keys()].filter(i => unsure[i])).toEqual([50, 80, 90])
  })
})
