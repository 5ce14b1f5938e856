/** Fringes, visibility, autocorrelation and the triple correlation of pairs, and pairs measured by them. */
import { describe, expect, it } from 'vitest'
import { angleDifference } from '../../../shared/astro/angles'
import { fringesOf } from '../../../workers/run/fringes'
import { directionOf } from '../../../workers/measure/fringes/direction'
import { ratioOf, visibilityOf } from '../../../workers/measure/fringes/fit'
import { meanPower, radialPower, SpectrumSum } from '../../../workers/measure/fringes/spectrum'
import { pullFigures } from '../../../scripts/measure-accuracy/table'
import { uniformFrom } from '../support/moving-double'

function normals(seed: number): () => number {
  const uniform = uniformFrom(seed)
  return () => Math.sqrt(-2 * Math.log(1 - uniform())) * Math.cos(2 * Math.PI * uniform())
}

const N = 64
/** A frame of point-like stars, band-limited by a narrow Gaussian. */
function dots(stars: { x: number, y: number, flux: number }[], sigma = 1.2, sky = 0): Float32Array {
  const frame = new Float32Array(N * N).fill(sky)
  for (let y = 0; y < N; y++) for (let x = 0; x < N; x++) for (const star of stars) frame[y * N + x]! += star.flux * Math.exp(-((x - star.x) ** 2 + (y - star.y) ** 2) / (2 * sigma * sigma))
  return frame
}

describe('fringes of two points', () => {
  // Visibility 2β/(1 + β²), least over greatest power ((1 − β)/(1 + β))², side over centre of the autocorrelation β/(1 + β²):
  // algebra of two delta functions (Labeyrie 1970), Δm 0, 0.5, 1, 2, 3.
  it.each([[0, 1, 0, 0.5], [0.5, 0.9026, 0.0512, 0.4513], [1, 0.6873, 0.1853, 0.3436], [2, 0.3092, 0.5276, 0.1546], [3, 0.1257, 0.7767, 0.0628]])('have the contrast of Δm %d', (dMag, visibility, least, side) => {
    const beta = 10 ** (-0.4 * dMag)
    expect(visibilityOf(beta)).toBeCloseTo(visibility, 4)
    expect(ratioOf(visibilityOf(beta))).toBeCloseTo(beta, 6)
    expect(((1 - beta) / (1 + beta)) ** 2).toBeCloseTo(least, 4)
    // From a frame: power along the line of the stars, over that of one star alone; 8 px apart, a period of N/8 = 8 cycles.
    const sum = new SpectrumSum(N, N, N, 1)
    sum.add(dots([{ x: 28, y: 32, flux: 1 }, { x: 36, y: 32, flux: beta }]), 32, 32, 0)
    const single = new SpectrumSum(N, N, N, 1)
    single.add(dots([{ x: 32, y: 32, flux: 1 }]), 32, 32, 0)
    const power = meanPower(sum.take().blocks).map((value, i) => value / meanPower(single.take().blocks)[i]!)
    const at = (kx: number) => power[kx * (2 * sum.cut + 1) + sum.cut]!
    expect(at(4) / at(8)).toBeCloseTo(least, 2)
    // Mean and first harmonic over one period: 1 + β² and 2β.
    const mean = Array.from({ length: 8 }, (_, k) => at(k + 4)).reduce((a, b) => a + b, 0) / 8
    const wave = Array.from({ length: 8 }, (_, k) => at(k + 4) * Math.cos(2 * Math.PI * (k + 4) / 8)).reduce((a, b) => a + b, 0) / 4
    expect(wave / mean).toBeCloseTo(visibility, 2)
    expect(wave / mean / 2).toBeCloseTo(side, 2)
  })

  it('give a magnitude difference of 2.0345 for a visibility of 0.3', () => {
    expect(-2.5 * Math.log10(ratioOf(0.3))).toBeCloseTo(2.0345, 4)
  })
})

describe('short exposures of a pair', () => {
  /** Exposures of drifting speckles: a few random ones about a moving place, the same for both stars. */
  function exposures(dx: number, dy: number, beta: number, { frames = 400, noise = 0.02, seed = 5 } = {}) {
    const uniform = uniformFrom(seed)
    const normal = normals(seed + 1)
    const sum = new SpectrumSum(N, N, N, 20)
    for (let k = 0; k < frames; k++) {
      const speckles = Array.from({ length: 5 }, () => ({ x: 32 + 2.5 * normal(), y: 32 + 2.5 * normal(), flux: uniform() }))
      const stars = speckles.flatMap(one => [one, { x: one.x + dx, y: one.y + dy, flux: beta * one.flux }])
      const frame = dots(stars, 1.3, 5)
      for (let i = 0; i < frame.length; i++) frame[i]! += noise * normal()
      sum.add(frame, 32, 32, Math.floor(k * 20 / frames))
    }
    return sum.take()
  }

  it('tell distance, angle and brightness without alignment, and the side', () => {
    const [dx, dy, dMag] = [6.3, -3.7, 1.1]
    const fringes = fringesOf(exposures(dx, dy, 10 ** (-0.4 * dMag)))
    const value = fringes.values!
    expect(value.quadrant).toBe('determined')
    expect(Math.abs(value.sepPx - Math.hypot(dx, dy))).toBeLessThan(Math.max(0.03, 4 * value.sepPxErr))
    expect(value.sepPxErr).toBeLessThan(0.1)
    expect(Math.abs(angleDifference(value.paDeg, Math.atan2(-dx, -dy) * 180 / Math.PI))).toBeLessThan(1)
    expect(Math.abs(value.dMag - dMag)).toBeLessThan(Math.max(0.05, 4 * value.dMagErr))
  })

  it('leave the side of equal stars open', () => {
    const spectra = exposures(7, 2, 1, { seed: 11 })
    expect(directionOf(spectra, 7, 2).significance).toBeLessThan(4)
    expect(fringesOf(spectra).values!.quadrant).toBe('undetermined')
  })

  it('of a single star show no pair', () => {
    expect(fringesOf(exposures(0, 0, 0, { seed: 21 })).values).toBeNull()
  })

  it('of noise alone show no signal at any frequency', () => {
    const normal = normals(31)
    const sum = new SpectrumSum(N, N, N, 10)
    for (let k = 0; k < 60; k++) sum.add(Float32Array.from({ length: N * N }, () => 10 + normal()), 32, 32, Math.floor(k / 6))
    const spectra = sum.take()
    if (spectra.blocks.length > 0) expect(radialPower(spectra).drownsAt * N).toBeLessThan(3)
    expect(spectra.blocks.length === 0 || fringesOf(spectra).values === null).toBe(true)
  })
})

describe('figures of pulls', () => {
  it('of normal pulls are 0 and 1 with two thirds inside', () => {
    const normal = normals(8)
    const { median, width, within } = pullFigures(Array.from({ length: 4000 }, normal))
    expect(Math.abs(median)).toBeLessThan(0.06)
    expect(Math.abs(width - 1)).toBeLessThan(0.06)
    expect(Math.abs(within - 0.6827)).toBeLessThan(0.03)
  })
})
