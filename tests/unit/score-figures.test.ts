import { describe, expect, it } from 'vitest'
import { airyIntensity, idealPeakShare, lambdaOverDPx } from '../../shared/optics'
import { halvesNoise, stackFigures } from '../../workers/score/figures'
import { halfWidth } from '../../workers/score/halfwidth'
import type { ScorePlan } from '../../workers/score/types'
import { gaussianNoise } from './support/noise'

const SIZE = 96
const plan: ScorePlan = {
  width: SIZE, height: SIZE, kind: 'star', form: 'star', blurPx: 0.7, windowPx: 64, centre: { x: 48, y: 48 },
  noise: 1, background: 100, saturatedSamples: 3, guide: null,
}
const spot = (i: number, x: number, y: number, fwhm: number) => Math.exp(-4 * Math.LN2 * (((i % SIZE) - x) ** 2 + (Math.floor(i / SIZE) - y) ** 2) / fwhm ** 2)

describe('half width along rays', () => {
  it.each([[2.5, 0], [3.3, 0.37], [5, -0.45], [9, 0.2]])('of a Gaussian of %d px, off centre by %d px', (fwhm, off) => {
    const image = Float32Array.from({ length: SIZE * SIZE }, (_, i) => 100 + 1000 * spot(i, 48 + off, 47 - off, fwhm))
    const found = halfWidth(image, SIZE, SIZE, 48, 47, 100, 0)
    expect(Math.abs(found.fwhm! / fwhm - 1)).toBeLessThan(fwhm < 3 ? 0.05 : 0.02)
    expect(Math.abs(found.peak / 1000 - 1)).toBeLessThan(0.04)
  })
  it('is not widened by a close companion', () => {
    const image = Float32Array.from({ length: SIZE * SIZE }, (_, i) => 100 + 1000 * spot(i, 48, 47, 4) + 900 * spot(i, 53.5, 49, 4))
    expect(Math.abs(halfWidth(image, SIZE, SIZE, 48, 47, 100, 0).fwhm! / 4 - 1)).toBeLessThan(0.06)
  })
  it('has an error that agrees with its scatter over noisy copies, and is null on sky', () => {
    const random = gaussianNoise(4)
    const widths: number[] = []
    let stated = 0
    for (let k = 0; k < 60; k++) {
      const found = halfWidth(Float32Array.from({ length: SIZE * SIZE }, (_, i) => 100 + 1000 * spot(i, 48, 47, 5) + 20 * random()), SIZE, SIZE, 48, 47, 100, 20)
      widths.push(found.fwhm!)
      stated += found.error! / 60
    }
    const mean = widths.reduce((s, v) => s + v, 0) / widths.length
    const scatter = Math.sqrt(widths.reduce((s, v) => s + (v - mean) ** 2, 0) / widths.length)
    expect(stated / scatter).toBeGreaterThan(0.4)
    expect(stated / scatter).toBeLessThan(2.5)
    expect(halfWidth(new Float32Array(SIZE * SIZE).fill(100), SIZE, SIZE, 48, 47, 100, 1).fwhm).toBeNull()
  })
})

describe('Strehl of a stack', () => {
  const optics = { apertureMm: 250, focalLengthMm: 6000, pixelSizeUm: 2.75, obstruction: 0.3, wavelengthNm: 550 }
  const scale = lambdaOverDPx(optics)
  // The radial profile once, every 1/50 px: the pattern itself is slow to compute.
  const profile = Float64Array.from({ length: 7200 }, (_, k) => airyIntensity(Math.PI * k / 50 / scale, 0.3))
  const pattern = (r: number) => {
    const k = Math.floor(50 * r)
    return profile[k]! + (50 * r - k) * (profile[k + 1]! - profile[k]!)
  }
  /** An ideal star of 1e6 units, pixel by pixel (3 × 3 points a pixel), and a double of it. */
  const ideal = (x: number, y: number, flux: number) => Float32Array.from({ length: SIZE * SIZE }, (_, i) => {
    let mean = 0
    for (const dx of [-1 / 3, 0, 1 / 3]) for (const dy of [-1 / 3, 0, 1 / 3]) mean += pattern(Math.hypot((i % SIZE) + dx - x, Math.floor(i / SIZE) + dy - y)) / 9
    return flux * Math.PI * (1 - 0.09) / 4 / scale ** 2 * mean
  })
  const figures = (stack: Float32Array) => stackFigures({ stack, planes: 1, mosaic: false, noise: 1, count: 100, fraction: 0.1, plan, optics })

  it('of a perfect star is 1 to a few per cent, and of a perfect double as well', () => {
    const one = ideal(48, 48, 1e6).map(v => v + 100)
    expect(Math.abs(figures(one).strehl! - 1)).toBeLessThan(0.06)
    expect(Math.max(...one) - 100).toBeCloseTo(1e6 * idealPeakShare(optics), -3)
    const b = ideal(57, 53, 5e5)
    expect(Math.abs(figures(one.map((v, i) => v + b[i]!)).strehl! - 1)).toBeLessThan(0.1)
  })
  it('of half the light in a halo is half, and without optics unknown', () => {
    const core = ideal(48, 48, 5e5)
    const halo = Float32Array.from({ length: SIZE * SIZE }, (_, i) => 5e5 * 4 * Math.LN2 / Math.PI / 400 * spot(i, 48, 48, 20))
    const found = figures(core.map((v, i) => v + halo[i]! + 100)).strehl!
    expect(found).toBeGreaterThan(0.48)
    expect(found).toBeLessThan(0.6)
    expect(stackFigures({ stack: core, planes: 1, mosaic: false, noise: null, count: 1, fraction: 1, plan, optics: null }).strehl).toBeNull()
  })
})

describe('noise from halves', () => {
  it('is that of their mean, and a star that both show adds nothing', () => {
    const random = gaussianNoise(6)
    const half = () => Float32Array.from({ length: SIZE * SIZE }, (_, i) => 100 + 5000 * spot(i, 48, 48, 4) + 8 * random())
    expect(Math.abs(halvesNoise(half(), half()) / (8 / Math.SQRT2) - 1)).toBeLessThan(0.04)
  })
})
