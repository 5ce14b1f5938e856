import { describe, expect, it } from 'vitest'
import * as optics from '../../shared/optics'
import { steadyCos, steadyExp, steadyLn, steadySin } from '../../shared/steadymath'

describe('diffraction limits of 200 mm at 550 nm (constants of the Airy pattern, recomputed independently)', () => {
  it.each([
    ['Rayleigh', optics.rayleighArcsec(200, 550), 0.6918], ['half-power width', optics.airyFwhmArcsec(200, 550), 0.5837],
    ['λ/D', optics.lambdaOverDArcsec(200, 550), 0.5672], ['Sparrow', optics.sparrowArcsec(200, 550), 0.5373], ['Dawes', optics.dawesArcsec(200), 0.58],
  ] as const)('%s', (_, value, expected) => expect(value).toBeCloseTo(expected, 3))

  it('has its first zero at Rayleigh, half power at half the width, and a dip of 0.735 between an equal pair at Rayleigh', () => {
    expect(optics.airyIntensity(Math.PI * optics.RAYLEIGH, 0)).toBeLessThan(1e-9)
    expect(optics.airyIntensity(Math.PI * optics.AIRY_FWHM / 2, 0)).toBeCloseTo(0.5, 5)
    const at = (x: number) => optics.airyIntensity(Math.PI * x, 0) + optics.airyIntensity(Math.PI * (x - optics.RAYLEIGH), 0)
    expect(at(optics.RAYLEIGH / 2) / at(0)).toBeCloseTo(0.735, 3)
  })
})

describe('sampling', () => {
  it('2.9 µm needs f/10.55 at 550 nm and f/14.50 at 400 nm, and gives 0.29908″/px at 2000 mm', () => {
    expect(optics.nyquistFocalRatio(2.9, 550)).toBeCloseTo(10.55, 2)
    expect(optics.nyquistFocalRatio(2.9, 400)).toBeCloseTo(14.5, 6)
    expect(optics.plateScale(2.9, 2000)).toBeCloseTo(0.299084, 6)
  })
  it('at Nyquist the half-power width is 2.058 px', () => {
    const px = optics.lambdaOverDPx({ apertureMm: 200, focalLengthMm: 200 * optics.nyquistFocalRatio(2.9, 550), pixelSizeUm: 2.9, obstruction: 0, wavelengthNm: 550 })
    expect(optics.AIRY_FWHM * px).toBeCloseTo(2.058, 3)
  })
})

describe('Strehl and the ideal peak', () => {
  it('exp(−σ²): 2π/14 gives 0.8176, 0.0752 waves gives 0.8, 1 rad gives 0.368', () => {
    expect(optics.strehlOfPhase(2 * Math.PI / 14)).toBeCloseTo(0.8176, 4)
    expect(optics.strehlOfPhase(2 * Math.PI * 0.0752)).toBeCloseTo(0.8, 3)
    expect(optics.strehlOfPhase(1)).toBeCloseTo(0.368, 3)
  })
  it.each([0, 0.33])('all light of an ideal star with obstruction %d lies where the pattern puts it', (obstruction) => {
    const telescope = { apertureMm: 250, focalLengthMm: 5000, pixelSizeUm: 2.75, obstruction, wavelengthNm: 550 }
    const scale = optics.lambdaOverDPx(telescope)
    // Sum of the pattern over all pixels times the central density is the whole; wings beyond 60 λ/D hold under 1 %.
    let sum = 0
    const dr = 0.02
    for (let r = dr / 2; r < 60; r += dr) sum += optics.airyIntensity(Math.PI * r, obstruction) * 2 * Math.PI * r * dr
    const whole = sum * scale * scale * Math.PI * (1 - obstruction ** 2) / 4 / (scale * scale)
    expect(whole).toBeGreaterThan(0.985)
    expect(whole).toBeLessThan(1.001)
    // Pixel averaging lowers the central density a little.
    const density = Math.PI * (1 - obstruction ** 2) / 4 / (scale * scale)
    expect(optics.idealPeakShare(telescope) / density).toBeGreaterThan(0.9)
    expect(optics.idealPeakShare(telescope) / density).toBeLessThan(0.99)
  })
  it('J1 at published points (Abramowitz & Stegun, table 9.1)', () => {
    expect(optics.besselJ1(1)).toBeCloseTo(0.4400505857, 9)
    expect(optics.besselJ1(5)).toBeCloseTo(-0.3275791376, 9)
    expect(optics.besselJ1(3.8317059702)).toBeCloseTo(0, 9)
  })
})

describe('steady elementary functions', () => {
  it('agree with the engine to 1e-13', () => {
    for (let i = -300; i <= 300; i++) {
      const x = i * 0.731
      expect(Math.abs(steadySin(x) - Math.sin(x))).toBeLessThan(1e-13)
      expect(Math.abs(steadyCos(x) - Math.cos(x))).toBeLessThan(1e-13)
      expect(Math.abs(steadyExp(x / 10) / Math.exp(x / 10) - 1)).toBeLessThan(1e-13)
      if (i !== 0) expect(Math.abs(steadyLn(Math.abs(x)) - Math.log(Math.abs(x)))).toBeLessThan(1e-13)
    }
    expect(steadyLn(-1)).toBeNaN()
    expect(steadyExp(-1000)).toBe(0)
  })
})
