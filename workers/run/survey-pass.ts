import type { StackImage } from '../api'
import type { Samples } from '../decode/types'
import type { PreparePlan } from '../prepare/types'
import type { CaptureFacts } from '../../shared/schemas/capture'
import type { Recipe } from '../../shared/schemas/recipe'
import type { PassContext } from './context'
import { unlessAborted } from './feed'
import { breathe } from './pool'
import { singleFrame } from './preview'
import type { Surveyed } from './survey-frames'

/** Frames looked at, spread over the capture. */
const SURVEY_FRAMES = 64
/** Pixels looked at in all, so that large frames do not keep the user waiting; at least a few frames all the same. */
const SURVEY_PIXELS = 10e6
const LEAST_FRAMES = 5

/** Frame numbers spread evenly over `count` frames, ascending, each once. */
export function spreadFrames(count: number, wanted: number): number[] {
  const n = Math.min(count, wanted)
  return Array.from({ length: n }, (_, i) => Math.floor((i + 0.5) * count / n))
}

/** Looks at some frames of the whole capture and decides what the recipe leaves open. A worker computes, so that a cancel is heard. */
export async function surveyPass({ frames, pool, signal, progress, emit }: PassContext, recipe: Recipe): Promise<Surveyed> {
  const { facts } = frames.reader
  const pixels = facts.width * facts.height
  const numbers = spreadFrames(frames.count, Math.max(LEAST_FRAMES, Math.min(SURVEY_FRAMES, Math.floor(SURVEY_PIXELS / pixels))))
  progress.begin('survey', 0, numbers.length)
  const samples: Samples[] = []
  for (const number of numbers) {
    const { samples: all, offset } = await frames.frame(number, signal)
    const frame = all.subarray(offset, offset + frames.frameSamples) as Samples
    samples.push(pool.shared ? frame : frame.slice())
    progress.add(1)
  }
  // Something to see at once: a single exposure, before anything is known of it.
  emit({ kind: 'preview', image: await singleFrame(frames, numbers[numbers.length >> 1]!, unrepaired(facts)) })
  await breathe()
  const surveyed = await unlessAborted(pool.call(0, { op: 'survey', facts, samples, recipe }), signal)
  progress.end()
  return surveyed
}

/** A plan that only knows the layout of a frame. */
function unrepaired({ width, height, planes, mosaic }: CaptureFacts): PreparePlan {
  return { width, height, planes, mosaic, saturation: null, hotPixels: new Int32Array(0), repairFrom: new Int32Array(0) }
}

/** A single prepared plane as an image. */
export function luminanceImage(luminance: Float32Array, width: number, height: number, count: number): StackImage {
  return { width, height, planes: 1, samples: luminance.slice(), count, restored: false }
}
