/**
 * Plans and results of registration. Plain data: plans cross worker boundaries as they are.
 *
 * plan.ts       makeRegisterPlan(survey, recipe, reference: Float32Array, refX, refY): RegisterPlan
 * registrar.ts  createRegistrar(plan): { register(luminance, expectedX, expectedY, out: FrameShift): void }
 *               (expected: the scorer's place of the target in this frame)
 * reference.ts  which frames make the next reference, with which weights and shifts
 * settle.ts     settleShifts(columns …): a second step over the whole table after a pass (continuity, outliers)
 */
import type { RegisterMethod } from '../../shared/schemas/recipe'
import type { TargetForm } from '../score/types'

/** The shift of one frame. Depends on that frame, the plan and the expected place alone. */
export interface FrameShift {
  /** Added to a frame's coordinates to land on the reference, px. */
  dx: number
  dy: number
  /** 0 (no better than chance) to 1 (no second candidate near). */
  confidence: number
  sure: boolean
  /**
   * Extended targets: how much of the reference's detail this frame carries (1: as much as the reference), found by
   * deconvolution; follows the Strehl ratio. NaN for stars, whose peak says it.
   */
  transfer: number
}

export interface RegisterPlan {
  width: number
  height: number
  method: RegisterMethod
  form: TargetForm
  windowPx: number
  blurPx: number
  /** Noise of one luminance sample at the background, sample units. */
  noise: number
  /** Reference luminance, full frame. */
  reference: Float32Array
  /** Place of the target in the reference, px. */
  refX: number
  refY: number
  /** How far from the expected place the target is looked for, px; absent: as far as the window allows. */
  reachPx?: number
}
