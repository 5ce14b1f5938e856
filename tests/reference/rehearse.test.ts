/** The simulator against published statistics of turbulence and of selected exposures. */
import { describe, expect, it } from 'vitest'
import { luckyShare, nollResiduals, selection } from '../fixtures/turbulence'

describe('simulated air', () => {
  it('has the residual variances of Noll 1976, Table IV', () => {
    const found = nollResiduals({ screens: 60, grid: 512, diameter: 48, seed: 5 })
    // Δ1 = 1.0299 (1.0324 with exact constants), Δ3 = 0.134 (0.1346), Δ4 = 0.111 (0.1114), each for D/r0 = 1. Tilt varies
    // from screen to screen: the mean over 60 is known to some 5 %. The grid lacks what is finer than 1/48 of the aperture:
    // about 0.1 % of the total, 1 % of what remains after tilt.
    expect(Math.abs(found.afterPiston / 1.031 - 1)).toBeLessThan(0.1)
    expect(Math.abs(found.afterTilt / 0.1343 - 1)).toBeLessThan(0.03)
    expect(Math.abs(found.afterFocus / 0.1112 - 1)).toBeLessThan(0.03)
  })

  it('has the lucky probabilities of Fried 1978, Table I', () => {
    // 0.765 ± 0.005, 0.334 ± 0.014, 0.0938 ± 0.0033 (from memory); 0.730, 0.326, 0.091 in a direct calculation with Noll's
    // covariances. Bounds: between the two, and three standard errors of this count.
    for (const [ratio, least, most] of [[3, 0.730, 0.765], [4, 0.326, 0.334], [5, 0.091, 0.0938]] as const) {
      const { share, draws } = luckyShare(ratio)
      const error = 3 * Math.sqrt(most * (1 - most) / draws)
      expect(share).toBeGreaterThan(least - error)
      expect(share).toBeLessThan(most + error)
    }
  })

  // Mean peak of the kept frames over the diffraction-limited peak (S) and width of their recentred mean in λ/D (F),
  // computed independently from Noll-correlated Zernike modes, 4000 frames a row, S ± 5 %. About 1200 frames here, 12 of
  // them at 1 %: S ± 8 % there and ± 6 % otherwise. The width of a core that stands on a halo depends on how it is taken
  // (a radial mean here): F ± 0.1, which still tells the rows' ends apart.
  const table = [
    { ratio: 3, shares: { 0.01: [0.760, 0.98], 0.1: [0.683, 0.99], 1: [0.452, 1.07] }, long: 3.10 },
    { ratio: 5, shares: { 0.01: [0.534, 0.99], 0.1: [0.423, 1.03], 1: [0.231, 1.24] }, long: 5.00 },
    { ratio: 7, shares: { 0.01: [0.349, 1.05], 0.1: [0.250, 1.17], 1: [0.137, 1.26] }, long: 6.86 },
  ]
  it.each(table)('has the Strehl ratio and width of selected frames at D/r0 = $ratio', ({ ratio, shares, long }) => {
    const found = selection(ratio, Object.keys(shares).map(Number))
    for (const [share, [strehl, width]] of Object.entries(shares)) {
      const { strehl: s, fwhm } = found.kept[Number(share)]!
      expect(Math.abs(s / strehl! - 1), `Strehl ratio at ${share}: ${s}`).toBeLessThan(Number(share) < 0.05 ? 0.08 : 0.06)
      expect(Math.abs(fwhm - width!), `width at ${share}: ${fwhm}`).toBeLessThan(0.1)
    }
    expect(Math.abs(found.longFwhm / long - 1), `long exposure: ${found.longFwhm}`).toBeLessThan(0.06)
  })
})
