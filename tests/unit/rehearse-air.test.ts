/** The air against published statistics, with few draws; the long version is tests/reference/rehearse.test.ts. */
import { describe, expect, it } from 'vitest'
import { nollResiduals } from '../fixtures/turbulence'

describe('phase screens', () => {
  it('have the residual variances of Noll 1976, Table IV: piston, tilt and focus removed', () => {
    const { afterPiston, afterTilt, afterFocus, draws } = nollResiduals({ screens: 10, grid: 256, diameter: 32 })
    expect(draws).toBeGreaterThan(150)
    // Δ1 = 1.030, Δ3 = 0.134, Δ4 = 0.111. The tilt of these few screens is known to some 10 %, the rest better.
    expect(afterPiston / 1.03).toBeGreaterThan(0.8)
    expect(afterPiston / 1.03).toBeLessThan(1.2)
    expect(Math.abs(afterTilt / 0.134 - 1)).toBeLessThan(0.06)
    expect(Math.abs(afterFocus / 0.111 - 1)).toBeLessThan(0.06)
  })
})
