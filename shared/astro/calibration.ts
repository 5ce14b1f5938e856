/** From the screen to the sky: scale, orientation and parity with their errors, applied to a measure. */
import { z } from 'zod'
import { reduce360 } from './angles'

export const parities = ['normal', 'mirrored'] as const

/** The part of a calibration that a measure needs. `northAngleDeg` runs from screen up counter-clockwise through screen left. */
export const skyCalibrationSchema = z.object({
  scaleArcsecPerPx: z.number().positive(), scaleErr: z.number().nonnegative(),
  northAngleDeg: z.number(), angleErr: z.number().nonnegative(),
  parity: z.enum(parities),
})
export type SkyCalibration = z.infer<typeof skyCalibrationSchema>

export interface ScreenValues { sepPx: number, sepPxErr: number, paDeg: number, paDegErr: number }
export interface SkyValues { sepArcsec: number, sepArcsecErr: number, paDeg: number, paDegErr: number }

/**
 * A measure on the sky. The errors of scale and orientation are added in squares to those of the fit: they are the same for
 * every measure made with this calibration, and do not average away.
 * σ_ρ² = (s σ_px)² + (ρ σ_s/s)², σ_θ² = σ_fit² + σ_orientation².
 */
export function onSky({ sepPx, sepPxErr, paDeg, paDegErr }: ScreenValues, { scaleArcsecPerPx, scaleErr, northAngleDeg, angleErr, parity }: SkyCalibration): SkyValues {
  return {
    sepArcsec: sepPx * scaleArcsecPerPx, sepArcsecErr: Math.hypot(sepPxErr * scaleArcsecPerPx, sepPx * scaleErr),
    // In a mirrored image angles on the sky run clockwise.
    paDeg: reduce360(parity === 'normal' ? paDeg - northAngleDeg : northAngleDeg - paDeg), paDegErr: Math.hypot(paDegErr, angleErr),
  }
}
