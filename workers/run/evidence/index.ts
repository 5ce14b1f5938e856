/** Evidence for a keep fraction: the keep curve, and whether the frames confirm each other. */
import type { Evidence } from '../../../shared/schemas/evidence'
import { prepareLuminance } from '../../prepare/frame'
import { nextReferenceFrames } from '../../register/reference'
import { makeRegisterPlan } from '../../register/plan'
import type { Pause } from '../../restore/convolve'
import type { RunState } from '../engine'
import type { FrameStore } from '../frames'
import { confirm } from './confirm'
import { keepCurve } from './curve'

/** Frames that are read once more to see whether they confirm the reference. */
const CONFIRMING = 96
/** A stack of other pixels that agrees with the reference less than this shows no signal. */
export const LEAST_CONFIRMED = 0.15

export async function evidenceOf(state: RunState, frames: FrameStore, pause: Pause): Promise<Evidence> {
  const { surveyed, refined, recipe, measure } = state
  const { plan, survey, score } = surveyed
  const register = makeRegisterPlan(survey, recipe, plan.width, plan.height, refined.reference.luminance, refined.reference.x, refined.reference.y)
  const which = confirmingFrames(state)
  const confirmed = await confirm({ score, register, by: measure, frames: luminances(frames, which, state, pause) })
  const signal = !survey.noSignal && !(confirmed.confirmed !== null && confirmed.confirmed < LEAST_CONFIRMED)
  const curve = state.ladder.counts.length > 0 ? await keepCurve(state, pause) : { measure: survey.kind === 'star' ? 'core' as const : 'transfer' as const, frequencies: null, absolute: false, points: [] }
  return { ...curve, ...confirmed, signal }
}

/** Frames spread over the capture that the reference was not made of; where nothing is ranked, of all. */
function confirmingFrames({ graded, surveyed, recipe }: RunState): number[] {
  const score = surveyed.survey.kind === 'star' ? graded.table.peak : graded.table.laplacian
  const ranked = Int32Array.from(score.keys()).filter(i => graded.table.setAside[i] === 0).sort((a, b) => score[b]! - score[a]! || a - b)
  const used = new Set(nextReferenceFrames(ranked, recipe.register.referenceFraction))
  const free = Array.from({ length: graded.table.count }, (_, i) => i).filter(i => !used.has(i) && (ranked.length === 0 || graded.table.setAside[i] === 0))
  return Array.from({ length: Math.min(CONFIRMING, free.length) }, (_, k) => free[Math.floor(k * free.length / Math.min(CONFIRMING, free.length))]!)
}

async function* luminances(frames: FrameStore, which: readonly number[], { surveyed: { plan } }: RunState, pause: Pause): AsyncGenerator<Float32Array> {
  const out = new Float32Array(plan.width * plan.height)
  for (const frame of which) {
    const { samples, offset } = await frames.frame(frame)
    prepareLuminance(samples, offset, plan, out)
    yield out
    await pause()
  }
}
