/** What the places of the colour planes say, in words for the figures. */
import type { ColourShifts } from '../schemas/run'
import { dispersionArcsec } from './dispersion'

/** Wavelengths of the colours of usual mosaics and filters, nm (common practice, no source). */
export const COLOUR_WAVELENGTHS = { red: 620, green: 530, blue: 450 } as const

export interface ColourSpread {
  /** From red to blue as they were recorded, px. */
  px: number
  arcsec: number | null
  /** Direction from red to blue in the image, degrees clockwise from up; the air raises blue, so this is where the zenith lies. */
  towardDeg: number
  /** What the air alone would do at this altitude, arcsec; null where the altitude is not known. */
  expectedArcsec: number | null
  /** Angle between that direction and the zenith, -180 to 180 degrees; null where the zenith's direction is not known. */
  offVerticalDeg: number | null
}

/**
 * @param scale arcsec per px, or null
 * @param altitudeDeg of the target, or null
 * @param zenithDeg direction of the zenith in the image, degrees clockwise from up, or null
 */
export function colourSpread({ red, blue }: ColourShifts, scale: number | null, altitudeDeg: number | null, zenithDeg: number | null): ColourSpread | null {
  if (!red || !blue) return null
  // A plane is moved back from where it was recorded: red's place less blue's.
  const dx = red.dx - blue.dx
  const dy = red.dy - blue.dy
  const px = Math.hypot(dx, dy)
  const towardDeg = (Math.atan2(dx, -dy) * 180 / Math.PI + 360) % 360
  const turn = zenithDeg === null ? null : ((towardDeg - zenithDeg + 540) % 360) - 180
  return {
    px, arcsec: scale === null ? null : px * scale, towardDeg,
    expectedArcsec: altitudeDeg === null ? null : dispersionArcsec(COLOUR_WAVELENGTHS.blue, COLOUR_WAVELENGTHS.red, altitudeDeg),
    offVerticalDeg: turn,
  }
}
