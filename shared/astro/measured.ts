/** The values of a measure as they are told: on the sky as far as the calibration goes, else on the screen. */
import type { UsedCalibration } from '../schemas/calibration'
import type { PairValues } from '../schemas/measure'
import { onSky } from './calibration'

export interface ToldValues {
  sep: number, sepErr: number, sepUnit: '″' | 'px'
  angle: number, angleErr: number
  /** True where the angle is a position angle; else it is the angle on the screen. */
  positionAngle: boolean
  dMag: number, dMagErr: number
}

export function toldValues(values: PairValues, calibration: Pick<UsedCalibration, 'scaleArcsecPerPx' | 'scaleErr' | 'northAngleDeg' | 'angleErr' | 'parity'> | null): ToldValues {
  const { dMag, dMagErr } = values
  const screen = { angle: values.paDeg, angleErr: values.paDegErr, positionAngle: false }
  if (!calibration) return { sep: values.sepPx, sepErr: values.sepPxErr, sepUnit: 'px', ...screen, dMag, dMagErr }
  const { northAngleDeg, angleErr, parity } = calibration
  const oriented = northAngleDeg !== null && parity !== null
  const sky = onSky(values, { ...calibration, northAngleDeg: northAngleDeg ?? 0, angleErr: angleErr ?? 0, parity: parity ?? 'normal' })
  return { sep: sky.sepArcsec, sepErr: sky.sepArcsecErr, sepUnit: '″', ...(oriented ? { angle: sky.paDeg, angleErr: sky.paDegErr, positionAngle: true } : screen), dMag, dMagErr }
}
