import type { FrameReader, Samples } from '../../decode/types'
import { prepareLuminance } from '../../prepare/frame'
import type { PreparePlan } from '../../prepare/types'

/** Frames that make the background; an odd number, so that the median is one of them. */
const FRAMES = 31
/** Values held at once while medians are taken. */
const MOST_VALUES = 2 ** 26

/** Luminance of a stored frame without any repair: the background takes hot pixels and fixed patterns away. */
export function rawPlan({ facts }: FrameReader): PreparePlan {
  const { width, height, planes, mosaic, saturation } = facts
  return { width, height, planes, mosaic, saturation, hotPixels: new Int32Array(0), repairFrom: new Int32Array(0) }
}

/**
 * The median of each pixel over frames spread through the capture: sky, offset, hot pixels and glow. A star that
 * crosses the field is nowhere in it, because it stands on a pixel in a small share of the frames only.
 */
export async function backgroundOf(reader: FrameReader, signal?: AbortSignal): Promise<Float32Array> {
  const plan = rawPlan(reader)
  const size = plan.width * plan.height
  const { frameCount } = reader.facts
  const wanted = Math.max(3, Math.min(FRAMES, frameCount, Math.floor(MOST_VALUES / size)))
  const count = wanted - 1 + wanted % 2
  const all: Float32Array[] = []
  for (let k = 0; k < Math.min(count, frameCount); k++) {
    const index = Math.floor((k + 0.5) * frameCount / Math.min(count, frameCount))
    const { samples } = await reader.readFrames(index, 1, signal)
    all.push(luminanceOf(samples, 0, plan))
  }
  const column = new Float32Array(all.length)
  const background = new Float32Array(size)
  for (let i = 0; i < size; i++) {
    for (let k = 0; k < all.length; k++) column[k] = all[k]![i]!
    column.sort()
    background[i] = column[all.length >> 1]!
  }
  return background
}

function luminanceOf(samples: Samples, offset: number, plan: PreparePlan): Float32Array {
  const out = new Float32Array(plan.width * plan.height)
  prepareLuminance(samples, offset, plan, out)
  return out
}
