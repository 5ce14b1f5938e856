/** Orbits of visual double stars: elements → position angle and separation. */
import { besselianYear } from './epoch'
import type { Polar } from './angles'
import { DEGREES, polarOf, precessionOfAngle, reduce360 } from './angles'

/** Campbell elements. Angles in degrees, a in arcseconds, P in years, T a year (both Besselian or both Julian alike). */
export interface OrbitElements {
  periodYears: number
  periastronYear: number
  eccentricity: number
  semiMajorAxisArcsec: number
  inclinationDeg: number
  nodeDeg: number
  /** Argument of periastron of the companion. */
  argumentDeg: number
}

/**
 * Eccentric anomaly E of E − e sin E = M, radians. Newton's method with bisection to fall back on: it
 * converges for every 0 ≤ e < 1. Throws a RangeError for other eccentricities.
 */
export function eccentricAnomaly(meanAnomaly: number, eccentricity: number): number {
  if (!(eccentricity >= 0 && eccentricity < 1)) throw new RangeError('An orbit that returns has an eccentricity from 0 to below 1.')
  const turns = Math.floor(meanAnomaly / (2 * Math.PI) + 0.5)
  const m = meanAnomaly - turns * 2 * Math.PI
  let low = m - eccentricity
  let high = m + eccentricity
  let e = m + eccentricity * Math.sin(m)
  for (let i = 0; i < 100; i++) {
    const error = e - eccentricity * Math.sin(e) - m
    if (error > 0) high = e
    else low = e
    const newton = e - error / (1 - eccentricity * Math.cos(e))
    const next = newton > low && newton < high ? newton : (low + high) / 2
    if (Math.abs(next - e) < 1e-14) return next + turns * 2 * Math.PI
    e = next
  }
  return e + turns * 2 * Math.PI
}

/** Thiele–Innes constants in the unit of a. Source: Meeus, Astronomical Algorithms, ch. 57 (from memory); Binnendijk 1960. */
export function thieleInnes(elements: OrbitElements): { A: number, B: number, F: number, G: number } {
  const w = elements.argumentDeg / DEGREES
  const node = elements.nodeDeg / DEGREES
  const ci = Math.cos(elements.inclinationDeg / DEGREES)
  const a = elements.semiMajorAxisArcsec
  return {
    A: a * (Math.cos(w) * Math.cos(node) - Math.sin(w) * Math.sin(node) * ci),
    B: a * (Math.cos(w) * Math.sin(node) + Math.sin(w) * Math.cos(node) * ci),
    F: a * (-Math.sin(w) * Math.cos(node) - Math.cos(w) * Math.sin(node) * ci),
    G: a * (-Math.sin(w) * Math.sin(node) + Math.cos(w) * Math.cos(node) * ci),
  }
}

/** Position angle (equator of the elements) and separation in arcseconds at a year on the elements' time scale. */
export function ephemeris(elements: OrbitElements, year: number): Polar {
  const mean = 2 * Math.PI * (year - elements.periastronYear) / elements.periodYears
  const anomaly = eccentricAnomaly(mean, elements.eccentricity)
  const x = Math.cos(anomaly) - elements.eccentricity
  const y = Math.sqrt(1 - elements.eccentricity ** 2) * Math.sin(anomaly)
  const { A, B, F, G } = thieleInnes(elements)
  return polarOf(B * x + G * y, A * x + F * y)
}

/** As ephemeris, the angle carried from the equator of `equinoxYear` to the equator of date (METHODS: the catalogue's convention). */
export function ephemerisOfDate(elements: OrbitElements, year: number, place: { rightAscensionDeg: number, declinationDeg: number, equinoxYear: number }): Polar {
  const polar = ephemeris(elements, year)
  const precession = precessionOfAngle(place.rightAscensionDeg, place.declinationDeg, year - place.equinoxYear)
  return { paDeg: reduce360(polar.paDeg + precession), sep: polar.sep }
}

/** Points of the apparent orbit as (east, north) in arcseconds, `steps` of them at equal eccentric anomaly. */
export function apparentOrbit(elements: OrbitElements, steps = 180): { east: number, north: number }[] {
  const { A, B, F, G } = thieleInnes(elements)
  const minor = Math.sqrt(1 - elements.eccentricity ** 2)
  return Array.from({ length: steps }, (_, i) => {
    const anomaly = 2 * Math.PI * i / steps
    const x = Math.cos(anomaly) - elements.eccentricity
    const y = minor * Math.sin(anomaly)
    return { east: B * x + G * y, north: A * x + F * y }
  })
}

/** Elements with the period in days and periastron as a modified Julian date, as some catalogues print them, in Besselian years. */
export function elementsFromDays(periodDays: number, periastronMjd: number): { periodYears: number, periastronYear: number } {
  return { periodYears: periodDays / 365.242198781, periastronYear: besselianYear(periastronMjd + 2400000.5) }
}
