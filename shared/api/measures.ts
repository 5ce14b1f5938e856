/** Tables of measures: what the club measured, one line a companion and run, and means over nights. */
import { z } from 'zod'
import type { ReviewState } from '../schemas/run'
import { idSchema } from './account'
import { nightSchema } from './archive'

export const measureQuery = z.object({ target: idSchema.optional(), from: nightSchema.optional(), to: nightSchema.optional() })

export interface MeasureLine {
  run: { id: string, night: string, owner: string, review: ReviewState }
  target: { id: string, name: string }
  /** "AB", "AC". */
  components: string
  /** Julian year of the middle of the capture, or of the night where the capture has no times. */
  epoch: number
  sep: number, sepErr: number, sepUnit: '″' | 'px'
  angle: number, angleErr: number, positionAngle: boolean
  dMag: number, dMagErr: number
  quadrant: 'determined' | 'undetermined'
  frames: number
  apertureMm: number | null
  calibration: string | null
  equinox: 'date' | '2000' | null
}

/** The mean over several nights of one pair; only of measures on the sky. */
export interface MeasureMean {
  target: { id: string, name: string }, components: string, nights: number, epoch: number
  sep: number, sepErr: number, angle: number, angleErr: number, dMag: number, dMagErr: number
  /** Chi-squared over its degrees of freedom, of separation and angle; about 1 where the errors are true. */
  scatter: { sep: number, angle: number }
}

export interface MeasureTable { lines: MeasureLine[], means: MeasureMean[], targets: { id: string, name: string }[] }
