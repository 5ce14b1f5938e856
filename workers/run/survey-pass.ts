import type { StackImage } from '../api'
import type { Samples } from '../decode/types'
import { prepareLuminance } from '../prepare/frame'
import { makePlan } from '../prepare/plan'
import type { PreparePlan } from '../prepare/types'
import { makeScorePlan } from '../score/plan'
import { survey } from '../score/survey'
import type { ScorePlan, Survey } from '../score/types'
import { fixedScale } from '../stack/fixed'
import type { Recipe } from '../../shared/schemas/recipe'
import type { PassContext } from './context'
import { breathe } from './pool'

/** Frames looked at, spread over the capture. */
const SURVEY_FRAMES = 64
/** Bytes that their luminance planes may take together. */
const SURVEY_BYTES = 256 * 2 ** 20

export interface Surveyed {
  plan: PreparePlan
  survey: Survey
  score: ScorePlan
  /** Fixed-point scale of stacks of this capture. */
  scale: number
}

/** Frame numbers spread evenly over `count` frames, ascending, each once. */
export function spreadFrames(count: number, wanted: number): number[] {
  const n = Math.min(count, wanted)
  return Array.from({ length: n }, (_, i) => Math.floor((i + 0.5) * count / n))
}

/** Looks at some frames of the whole capture and decides what the recipe leaves open. */
export async function surveyPass({ frames, signal, progress }: PassContext, recipe: Recipe): Promise<Surveyed> {
  const { facts } = frames.reader
  const pixels = facts.width * facts.height
  const numbers = spreadFrames(frames.count, Math.max(5, Math.min(SURVEY_FRAMES, Math.floor(SURVEY_BYTES / (pixels * 4)))))
  progress.begin('survey', 0, numbers.length)
  const samples: Samples[] = []
  for (const number of numbers) {
    const { samples: all, offset } = await frames.frame(number, signal)
    samples.push(all.subarray(offset, offset + frames.frameSamples) as Samples)
    progress.add(1)
  }
  const plan = makePlan(facts, samples, recipe)
  const planes = samples.map((frame) => {
    const luminance = new Float32Array(pixels)
    prepareLuminance(frame, 0, plan, luminance)
    return luminance
  })
  await breathe()
  const found = survey(planes, facts.width, facts.height, facts.mosaic !== 'none')
  await breathe()
  signal.throwIfAborted()
  const score = makeScorePlan(found, recipe, facts.width, facts.height)
  progress.end()
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

/** A single prepared plane as an image. */
export function luminanceImage(luminance: Float32Array, width: number, height: number, count: number): StackImage {
  return { width, height, planes: 1, samples: luminance.slice(), count, restored: false }
}
