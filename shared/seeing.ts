/**
 * Formulas of the air (those of the telescope are in optics.ts). Units are in the names; all functions are pure and throw
 * a RangeError for values that have no meaning. Sources stand beside each; "from memory" where the page was not read.
 */
import { ARCSEC_PER_RADIAN } from './optics'

function positive(name: string, value: number): number {
  if (!(value > 0) || !Number.isFinite(value)) throw new RangeError(`${name} must be a positive number, not ${value}.`)
  return value
}

/** Table I of D. L. Fried 1978, J. Opt. Soc. Am. 68, 1651-1658 (values from memory): D/r0 and probability. */
const LUCKY_TABLE = [[0, 1], [2, 0.986], [3, 0.765], [4, 0.334], [5, 0.0938], [6, 0.0192], [7, 2.87e-3], [10, 1.07e-6]] as const

/**
 * Probability of a lucky exposure: tilt-removed wavefront variance over the aperture of at most 1 rad². Fried's table,
 * joined in log P over (D/r0)²; from 10 on the slope of his formula 5.6 exp(−0.1557 (D/r0)²), which must not be used
 * below 3.5 (it exceeds 1 below 3.33).
 */
export function luckyProbability(apertureOverR0: number): number {
  if (!(apertureOverR0 >= 0)) throw new RangeError(`D/r0 must not be negative, but is ${apertureOverR0}.`)
  const squared = apertureOverR0 ** 2
  for (let i = 1; i < LUCKY_TABLE.length; i++) {
    const [d1, p1] = LUCKY_TABLE[i]!
    if (apertureOverR0 > d1) continue
    const [d0, p0] = LUCKY_TABLE[i - 1]!
    const share = (squared - d0 ** 2) / (d1 ** 2 - d0 ** 2)
    return p0 * (p1 / p0) ** share
  }
  return 1.07e-6 * Math.exp(-0.1557 * (squared - 100))
}

/** Full width of a long exposure at half maximum, arcsec: 0.98 λ/r0 for an infinite outer scale (Fried 1966; Dierickx 1992, J. Mod. Opt. 39, 569; from memory). */
export function seeingFwhmArcsec(r0Mm: number, wavelengthNm: number): number {
  return 0.98 * ARCSEC_PER_RADIAN * positive('The wavelength', wavelengthNm) * 1e-6 / positive('r0', r0Mm)
}

/** Fried's parameter, mm, from the long-exposure width at the same wavelength. */
export function friedParameterMm(seeingArcsec: number, wavelengthNm: number): number {
  return 0.98 * ARCSEC_PER_RADIAN * positive('The wavelength', wavelengthNm) * 1e-6 / positive('The seeing', seeingArcsec)
}

/** r0 at another wavelength and airmass: ∝ λ^(6/5) X^(−3/5) (Fried 1966, from memory). */
export function scaleFriedParameter(r0Mm: number, from: { wavelengthNm: number, airmass?: number }, to: { wavelengthNm: number, airmass?: number }): number {
  return positive('r0', r0Mm) * (positive('The wavelength', to.wavelengthNm) / positive('The wavelength', from.wavelengthNm)) ** 1.2
    * (positive('The airmass', from.airmass ?? 1) / positive('The airmass', to.airmass ?? 1)) ** 0.6
}

/** Coherence time, ms: 0.314 r0/v (Roddier 1981, Prog. Optics 19, 281; from memory). */
export function coherenceTimeMs(r0Mm: number, windMPerS: number): number {
  return 0.314 * positive('r0', r0Mm) / positive('The wind', windMPerS)
}

/** Isoplanatic angle, arcsec: 0.314 r0/h for turbulence at height h (Fried 1982, Roddier 1981; from memory). */
export function isoplanaticAngleArcsec(r0Mm: number, heightM: number): number {
  return 0.314 * ARCSEC_PER_RADIAN * positive('r0', r0Mm) * 1e-3 / positive('The height', heightM)
}

/** Image motion on one axis, arcsec rms: σ² = 0.182 λ² r0^(−5/3) D^(−1/3) (from memory). The telescope's own shake adds to it. */
export function imageMotionArcsec(r0Mm: number, apertureMm: number, wavelengthNm: number): number {
  const metres = positive('The wavelength', wavelengthNm) * 1e-9
  return ARCSEC_PER_RADIAN * Math.sqrt(0.182 * metres ** 2 * (positive('r0', r0Mm) * 1e-3) ** (-5 / 3) * (positive('The aperture', apertureMm) * 1e-3) ** (-1 / 3))
}
