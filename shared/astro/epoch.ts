/** Epochs of measures. */

/** Julian date of 1970-01-01T00:00:00 UTC. */
const UNIX_EPOCH_JD = 2440587.5

/** Julian date (UTC) of a time given in milliseconds since 1970-01-01T00:00:00 UTC. */
export function julianDate(unixMs: number): number {
  return UNIX_EPOCH_JD + unixMs / 86_400_000
}

/** Julian year of a Julian date: J = 2000 + (JD − 2451545.0) / 365.25 (IAU 1976 definition). */
export function julianYear(jd: number): number {
  return 2000 + (jd - 2451545) / 365.25
}

/** Besselian year: B = 1900 + (JD − 2415020.31352) / 365.242198781 (Lieske 1979, A&A 73, 282). */
export function besselianYear(jd: number): number {
  return 1900 + (jd - 2415020.31352) / 365.242198781
}

/** Julian date of a Besselian year, the inverse of besselianYear. */
export function julianDateOfBesselian(year: number): number {
  return 2415020.31352 + (year - 1900) * 365.242198781
}
