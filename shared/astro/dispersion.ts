/**
 * Refraction of air by colour: how far the atmosphere draws a point of light apart along the vertical.
 *
 * Filippenko 1982, PASP 94, 715, equations 1-5 (Edlén's formula for the index of air, with pressure, temperature and water
 * vapour); a plane-parallel atmosphere, good to some per cent above 20° of altitude.
 */

/** The air at the telescope: pressure and water vapour in mm of mercury, temperature in °C. */
export interface AirAtSite { pressureMmHg: number, temperatureC: number, vapourMmHg: number }

/** Sea level on a mild evening; what is taken where nothing is known. */
export const USUAL_AIR: AirAtSite = { pressureMmHg: 760, temperatureC: 15, vapourMmHg: 8 }

/** (n − 1) × 10⁶ of air at a wavelength in nm, 200-2000. */
export function refractivity(wavelengthNm: number, { pressureMmHg: p, temperatureC: t, vapourMmHg: f }: AirAtSite = USUAL_AIR): number {
  const s = (1000 / wavelengthNm) ** 2
  const standard = 64.328 + 29498.1 / (146 - s) + 255.4 / (41 - s)
  const warm = 1 + 0.003661 * t
  return standard * p * (1 + (1.049 - 0.0157 * t) * 1e-6 * p) / (720.883 * warm) - f * (0.0624 - 0.00068 * s) / warm
}

/**
 * How much higher light of one wavelength stands in the sky than light of another, arcsec (positive: toward the zenith).
 * Blue stands higher than red.
 * @param altitudeDeg of the target, above 0 to 90
 */
export function dispersionArcsec(wavelengthNm: number, againstNm: number, altitudeDeg: number, air: AirAtSite = USUAL_AIR): number {
  const tanZenith = Math.tan((90 - altitudeDeg) * Math.PI / 180)
  return 206264.806 * (refractivity(wavelengthNm, air) - refractivity(againstNm, air)) * 1e-6 * tanZenith
}
