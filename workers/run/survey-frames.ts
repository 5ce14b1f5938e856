import type { Samples } from '../decode/types'
import { prepareLuminance } from '../prepare/frame'
import { makePlan } from '../prepare/plan'
import type { PreparePlan } from '../prepare/types'
import { makeScorePlan } from '../score/plan'
import { survey } from '../score/survey'
import type { ScorePlan, Survey } from '../score/types'
import { fixedScale } from '../stack/fixed'
import type { CaptureFacts } from '../../shared/schemas/capture'
import type { Recipe } from '../../shared/schemas/recipe'

export interface Surveyed {
  plan: PreparePlan
  survey: Survey
  score: ScorePlan
  /** Fixed-point scale of stacks of this capture. */
  scale: number
}

/** The arithmetic of the survey: faulty pixels, noise, kind of target, window, first reference. */
export function surveyFrames(facts: CaptureFacts, samples: Samples[], recipe: Recipe): Surveyed {
  const { width, height } = facts
  const plan = makePlan(facts, samples, recipe)
  const planes = samples.map((frame) => {
    const luminance = new Float32Array(width * height)
    prepareLuminance(frame, 0, plan, luminance)
    return luminance
  })
  const found = survey(planes, width, height, facts.mosaic !== 'none')
  const score = makeScorePlan(found, recipe, width, height)
  return { plan, survey: found, score, scale: fixedScale(largestSample(facts.sampleKind, facts.bitDepth, samples)) }
}

/** Largest magnitude that samples reach: by their depth, or, for floats, twice what the survey saw. */
function largestSample(kind: string, bitDepth: number, samples: Samples[]): number {
  if (kind === 'uint8') return 255
  if (kind === 'uint16') return 2 ** Math.min(16, bitDepth) - 1
  let largest = 0
  for (const frame of samples) {
    for (let i = 0; i < frame.length; i++) {
      const value = Math.abs(frame[i]!)
      if (value > largest && Number.isFinite(value)) largest = value
    }
  }
  return 2 * largest
}
