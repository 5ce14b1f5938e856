/** What turns pixels into arcseconds and angles on the screen into position angles, and how it is known. */
import { z } from 'zod'
import { parities } from '../astro/calibration'

export const calibrationMethods = ['optics', 'drift'] as const
/** Angles of a drift are for the equator of the date of the drift. */
export const equinoxes = ['date', '2000'] as const

export const calibrationDataSchema = z.object({
  method: z.enum(calibrationMethods),
  scaleArcsecPerPx: z.number().positive().max(1000), scaleErr: z.number().nonnegative(),
  /** Where north lies, from screen up counter-clockwise through screen left; null where the orientation is not known. */
  northAngleDeg: z.number().min(0).lt(360).nullable(), angleErr: z.number().nonnegative().nullable(),
  /** Said by the observer, never guessed; null where it was not said: then there are no position angles. */
  parity: z.enum(parities).nullable(),
  equinox: z.enum(equinoxes).nullable(),
  /** Where it comes from: the drift's capture, its time, the star's declination. */
  capture: z.string().max(200), takenAt: z.string().nullable(), declinationDeg: z.number().nullable(),
  frames: z.number().int().nonnegative(), lengthPx: z.number().nonnegative(),
})
export type CalibrationData = z.infer<typeof calibrationDataSchema>

/** A calibration as it was used for a measure: kept with the measure, whatever becomes of the club's list. */
export const usedCalibrationSchema = calibrationDataSchema.extend({ id: z.string().nullable(), name: z.string().max(120) })
export type UsedCalibration = z.infer<typeof usedCalibrationSchema>

export const calibrationBody = z.object({ name: z.string().trim().min(1).max(120), instrumentId: z.string().regex(/^[\w-]{22}$/).nullable().default(null), data: calibrationDataSchema })
export interface Calibration { id: string, name: string, ownerName: string, mine: boolean, instrument: { id: string, name: string } | null, createdAt: string, data: CalibrationData }
