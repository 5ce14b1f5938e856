/**
 * Diffraction, sampling and the ideal image of a star. Lengths in the unit of the name; λ in nm, D in mm.
 * Constants of an unobstructed circle: Rayleigh, half-power width, Sparrow are properties of (2 J1(v)/v)²
 * (Born & Wolf, Principles of Optics, ch. 8.5, from memory; recomputed). Dawes 1867, Mem. RAS 35.
 */
import { steadyCos, steadySin } from './steadymath'

/** One radian in arcseconds. */
export const ARCSEC_PER_RADIAN = 206264.80624709636

export const RAYLEIGH = 1.2196698912665045
export const AIRY_FWHM = 1.0289939
export const SPARROW = 0.94715

/** Telescope and camera, as far as an ideal star image depends on them. */
export interface OpticsLike {
  apertureMm: number
  focalLengthMm: number
  pixelSizeUm: number
  /** Diameter of the central obstruction over that of the aperture, 0 to below 1. */
  obstruction: number
  wavelengthNm: number
}

/** λ/D on the sky, arcseconds. */
export function lambdaOverDArcsec(apertureMm: number, wavelengthNm: number): number {
  return wavelengthNm * 1e-6 / apertureMm * ARCSEC_PER_RADIAN
}

export const rayleighArcsec = (apertureMm: number, wavelengthNm: number): number => RAYLEIGH * lambdaOverDArcsec(apertureMm, wavelengthNm)
export const airyFwhmArcsec = (apertureMm: number, wavelengthNm: number): number => AIRY_FWHM * lambdaOverDArcsec(apertureMm, wavelengthNm)
export const sparrowArcsec = (apertureMm: number, wavelengthNm: number): number => SPARROW * lambdaOverDArcsec(apertureMm, wavelengthNm)
/** Dawes' rule for equal pairs, visual, no wavelength: 116″ over the aperture in millimetres. */
export const dawesArcsec = (apertureMm: number): number => 116 / apertureMm

/** Arcseconds per pixel. */
export function plateScale(pixelSizeUm: number, focalLengthMm: number): number {
  return pixelSizeUm / focalLengthMm * ARCSEC_PER_RADIAN / 1000
}

/** Least focal ratio that samples the optical cut-off twice: N = 2 p / λ. A mosaic's red and blue need twice that. */
export function nyquistFocalRatio(pixelSizeUm: number, wavelengthNm: number): number {
  return 2 * pixelSizeUm / (wavelengthNm / 1000)
}

/** λ/D in pixels: the focal ratio times λ over the pixel. */
export function lambdaOverDPx(optics: OpticsLike): number {
  return optics.wavelengthNm / 1000 * optics.focalLengthMm / optics.apertureMm / optics.pixelSizeUm
}

/** Strehl ratio of a small rms wavefront error, radians: exp(−σ²) (extended Maréchal form), given by its series. */
export function strehlOfPhase(rmsRadians: number): number {
  let term = 1
  let sum = 1
  for (let i = 1; i < 60; i++) {
    term *= -rmsRadians * rmsRadians / i
    sum += term
  }
  return Math.max(0, sum)
}

/** Bessel function of the first kind, order 1: Bessel's integral by the trapezium rule, exact to rounding for |x| < 60. */
export function besselJ1(x: number): number {
  // J1(x) = (1/π) ∫0^π cos(τ − x sin τ) dτ; the integrand is periodic, so the rule converges geometrically.
  const n = 64 + 2 * Math.ceil(Math.abs(x))
  let sum = 0
  for (let k = 0; k < n; k++) {
    const tau = 2 * Math.PI * k / n
    sum += steadyCos(tau - x * steadySin(tau))
  }
  return sum / n
}

/** Intensity of the ideal star image over its central value, v = π r D/λ with r the angle from the axis. */
export function airyIntensity(v: number, obstruction: number): number {
  const lobe = (x: number) => (Math.abs(x) < 1e-4 ? 1 - x * x / 8 : 2 * besselJ1(x) / x)
  const e2 = obstruction * obstruction
  const amplitude = (lobe(v) - e2 * (obstruction > 0 ? lobe(obstruction * v) : 0)) / (1 - e2)
  return amplitude * amplitude
}

/**
 * Share of a star's light that falls on the pixel it is centred on, for perfect optics. The share per pixel area at the
 * very centre is π (1 − ε²)/4 × (D/λ)²; the pixel's mean of the pattern is taken by Gauss-Legendre quadrature.
 */
export function idealPeakShare(optics: OpticsLike): number {
  const scale = lambdaOverDPx(optics)
  const nodes = [0.1834346424956498, 0.525532409916329, 0.7966664774136267, 0.9602898564975363]
  const weights = [0.362683783378362, 0.3137066458778873, 0.2223810344533745, 0.1012285362903763]
  let mean = 0
  for (let i = 0; i < 4; i++) {
    for (let j = 0; j < 4; j++) {
      const x = 0.5 * nodes[i]!
      const y = 0.5 * nodes[j]!
      mean += weights[i]! * weights[j]! * airyIntensity(Math.PI * Math.sqrt(x * x + y * y) / scale, optics.obstruction)
    }
  }
  return Math.PI * (1 - optics.obstruction * optics.obstruction) / 4 / (scale * scale) * mean
}
