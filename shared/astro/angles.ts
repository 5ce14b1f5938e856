/** Angles on the sky: position angle, separation, and the road from pixels to both. */

export const DEGREES = 180 / Math.PI

/** Reduces an angle in degrees to 0 ≤ angle < 360. */
export function reduce360(degrees: number): number {
  const reduced = degrees % 360
  // Adding 360 to a tiny negative angle rounds to 360 itself.
  const positive = reduced < 0 ? reduced + 360 : reduced
  return positive >= 360 ? 0 : positive
}

/** The difference a − b in degrees, −180 < difference ≤ 180. */
export function angleDifference(a: number, b: number): number {
  const difference = reduce360(a - b)
  return difference > 180 ? difference - 360 : difference
}

/** A place relative to another: position angle in degrees from north through east, and separation in the unit given. */
export interface Polar { paDeg: number, sep: number }

/** Position angle and separation of an offset (east, north). The angle of a zero offset is 0. */
export function polarOf(east: number, north: number): Polar {
  return { paDeg: reduce360(Math.atan2(east, north) * DEGREES), sep: Math.hypot(east, north) }
}

/**
 * How an image lies on the sky. A single angle cannot say it: mirrored optics need the parity.
 *
 * - `scaleArcsecPerPx`: arcseconds per pixel
 * - `upPaDeg`: position angle of screen up (towards row 0), degrees
 * - `parity`: 1 as the sky is seen (with north up, east is left), −1 mirrored
 */
export interface Orientation { scaleArcsecPerPx: number, upPaDeg: number, parity: 1 | -1 }

/** Offset on the sky, arcseconds (east, north), of a pixel offset (dx right, dy down). */
export function skyOffset(dx: number, dy: number, orientation: Orientation): { east: number, north: number } {
  const up = orientation.upPaDeg / DEGREES
  const s = orientation.scaleArcsecPerPx
  // Screen up points to position angle `up`; screen left to up + 90° (normal parity) or up − 90° (mirrored).
  const alongUp = -dy * s
  const alongLeft = -dx * s * orientation.parity
  return {
    east: alongUp * Math.sin(up) + alongLeft * Math.cos(up),
    north: alongUp * Math.cos(up) - alongLeft * Math.sin(up),
  }
}

/** Pixel offset (dx right, dy down) of an offset on the sky; the inverse of skyOffset. */
export function pixelOffset(east: number, north: number, orientation: Orientation): { dx: number, dy: number } {
  const up = orientation.upPaDeg / DEGREES
  const s = orientation.scaleArcsecPerPx
  const alongUp = east * Math.sin(up) + north * Math.cos(up)
  const alongLeft = east * Math.cos(up) - north * Math.sin(up)
  return { dx: -alongLeft * orientation.parity / s, dy: -alongUp / s }
}

/** The FITS CD matrix in degrees per pixel, for the FITS pixel axes (x right, y up). det < 0 is normal parity. */
export function cdMatrix(orientation: Orientation): [[number, number], [number, number]] {
  const right = skyOffset(1, 0, orientation)
  const up = skyOffset(0, -1, orientation)
  return [[right.east / 3600, up.east / 3600], [right.north / 3600, up.north / 3600]]
}

/**
 * Reads an orientation from a CD matrix in degrees per pixel (FITS axes, y up).
 * Returns null where the matrix is singular. Skew and unequal axes are averaged away: the scale is
 * √|det| and the angle that of the y axis.
 */
export function orientationOfCd(cd: [[number, number], [number, number]]): Orientation | null {
  const det = cd[0][0] * cd[1][1] - cd[0][1] * cd[1][0]
  if (!Number.isFinite(det) || det === 0) return null
  return {
    scaleArcsecPerPx: Math.sqrt(Math.abs(det)) * 3600,
    upPaDeg: polarOf(cd[0][1], cd[1][1]).paDeg,
    parity: det < 0 ? 1 : -1,
  }
}

/**
 * Change of a position angle by precession, degrees: 0.0055675° sin α sec δ (t − t0), t in years.
 * To be added to an angle for the equator of t0 to have it for the equator of t. n = 20.0431″ a year (IAU 1976).
 */
export function precessionOfAngle(rightAscensionDeg: number, declinationDeg: number, years: number): number {
  return 20.0431 / 3600 * Math.sin(rightAscensionDeg / DEGREES) / Math.cos(declinationDeg / DEGREES) * years
}

/** Arcseconds a second by which a star at this declination drifts past a telescope at rest: 360°·3600 / 86164.0905 s · cos δ. */
export function driftRate(declinationDeg: number): number {
  return 360 * 3600 / 86164.0905 * Math.cos(declinationDeg / DEGREES)
}
