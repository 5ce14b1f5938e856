import type { StackImage } from '../api'
import { outPlanes, prepareColour, prepareLuminance } from '../prepare/frame'
import type { PreparePlan } from '../prepare/types'
import { coveredBy } from '../stack/accumulate'
import { coverageCounts, coverageMarks, markCovered } from '../stack/coverage'
import { fillUncovered, meanOf } from '../stack/mean'
import type { GradeTable } from './columns'
import { addFrame, makeAdder } from './computer'
import type { PassContext } from './context'
import type { FrameStore } from './frames'
import type { Surveyed } from './survey-frames'

/** Frames in a growing preview at most. */
const PREVIEW_FRAMES = 24

/** A stack of the best frames so far, placed by what is known of them; null while there is nothing to show. */
export async function growingPreview({ frames, signal }: PassContext, surveyed: Surveyed, table: GradeTable): Promise<StackImage | null> {
  const { plan, survey, scale } = surveyed
  const score = survey.kind === 'star' ? table.peak : table.laplacian
  const best = bestFrames(score, table.setAside, frames, PREVIEW_FRAMES)
  if (best.length === 0) return null
  const { width, height } = plan
  const planes = outPlanes(plan)
  const size = width * height
  const marks = coverageMarks(width, height)
  const adder = makeAdder({ plan, planes, scale, kernel: 'nearest' }, 1)
  const small = adder.kernels.ints(size * planes)
  for (const i of best) {
    const dx = table.dx[i]!, dy = table.dy[i]!
    addFrame(adder, await frames.frame(i, signal), 0, dx, dy, 1, small)
    markCovered(marks, width, coveredBy('nearest', width, height, dx, dy), 1)
  }
  const counts = coverageCounts(marks, width, height)
  const samples = meanOf(new Float64Array(small), counts, scale, planes)
  fillUncovered(samples, counts, width, height, planes)
  return { width, height, planes, samples, count: best.length, restored: false }
}

/** The best scored frames that are in memory, best first. */
function bestFrames(score: Float64Array, setAside: Uint8Array, frames: FrameStore, most: number): number[] {
  const best: number[] = []
  for (let i = 0; i < score.length; i++) {
    const value = score[i]!
    if (Number.isNaN(value) || setAside[i] || (best.length === most && value <= score[best[most - 1]!]!) || !frames.holds(i)) continue
    let at = best.length
    while (at > 0 && score[best[at - 1]!]! < value) at--
    best.splice(at, 0, i)
    if (best.length > most) best.pop()
  }
  return best
}

/** One frame for looking at: prepared where the capture was surveyed, else as stored. */
export async function singleFrame(frames: FrameStore, index: number, plan: PreparePlan | null): Promise<StackImage> {
  const { width, height, planes } = frames.reader.facts
  const { samples, offset } = await frames.frame(index)
  if (!plan) return { width, height, planes, samples: new Float32Array(samples.subarray(offset, offset + frames.frameSamples)), count: 1, restored: false }
  const shown = outPlanes(plan)
  const out = new Float32Array(width * height * shown)
  if (shown === 3) prepareColour(samples, offset, plan, out)
  else prepareLuminance(samples, offset, plan, out)
  return { width, height, planes: shown, samples: out, count: 1, restored: false }
}

/** The plain average prepared like a frame. */
export function shownAverage(average: StackImage, plan: PreparePlan): StackImage {
  const planes = outPlanes(plan)
  const samples = new Float32Array(average.width * average.height * planes)
  const stored = average.samples as Float32Array<ArrayBuffer>
  if (planes === 3) prepareColour(stored, 0, plan, samples)
  else prepareLuminance(stored, 0, plan, samples)
  return { ...average, planes, samples }
}
