import type { RestorationReport } from '../api'
import type { RestorePlan } from '../../shared/schemas/restoration'
import type { Overshoot } from './guards'

/** What is told of a restoration beside the picture. */
export function reportOf(plan: RestorePlan, overshoot: Overshoot | null, noiseGain: number | null, rounds: number): RestorationReport {
  const middle = plan.planes[Math.min(1, plan.planes.length - 1)]
  return {
    method: plan.method, reason: plan.reason, gains: middle?.gains ?? [], rounds, noiseGain, strehl: plan.strehl, apertureOverR0: plan.apertureOverR0,
    overshoot: overshoot ?? { under: 0, over: 0, rimBright: null, rimDark: null },
  }
}
