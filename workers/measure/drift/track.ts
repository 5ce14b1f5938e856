import type { FrameReader } from '../../decode/types'
import { prepareLuminance } from '../../prepare/frame'
import { backgroundOf, rawPlan } from './background'
import { createFinder } from './find'
import { commonMotion, placeAt, refineMotion, type Motion } from './line'
import { createWindowedCentre, halfWidthOf, Cutouts } from './centre'
import { DriftError, type DriftTrack } from './types'

/** A star must stand so many times over the noise of the smoothed frame. */
const LEAST_STRENGTH = 8
/** The air moves a star image by less than this about its track, px (checked against the scatter afterwards). */
const TOLERANCE = 12
const BLOCK_BYTES = 8 * 2 ** 20

export interface TrackOptions { signal?: AbortSignal, onProgress?: (done: number, total: number) => void }

/**
 * Follows the brightest star that crosses the field. Two looks at the frames: the first finds the straight track that
 * most frames agree with, the second measures the star near it in every frame.
 * Throws DriftError where there are no times, no star or no motion.
 */
export async function trackStar(reader: FrameReader, { signal, onProgress }: TrackOptions = {}): Promise<DriftTrack> {
  const { facts, seconds } = reader
  if (!seconds) throw new DriftError('This capture has no times of its frames, and a drift is measured in seconds. Record it as SER with times, or as FITS files with DATE-OBS.')
  if (facts.frameCount < 10) throw new DriftError(`A drift needs 10 frames at least; this capture has ${facts.frameCount}.`)
  const background = await backgroundOf(reader, signal)
  const total = 2 * facts.frameCount

  const find = createFinder(facts.width, facts.height)
  const cutouts = new Cutouts(facts.width, facts.height)
  const rough = { frame: [] as number[], seconds: [] as number[], x: [] as number[], y: [] as number[] }
  await everyFrame(reader, background, signal, (frame, index) => {
    onProgress?.(index, total)
    const star = find(frame, null)
    if (!star || star.strength < LEAST_STRENGTH) return
    rough.frame.push(index)
    rough.seconds.push(seconds[index]!)
    rough.x.push(star.x)
    rough.y.push(star.y)
    cutouts.add(frame, star.x, star.y)
  })
  const motion = trackMotion(rough, facts.frameCount)
  const halfWidthPx = halfWidthOf(cutouts)

  const centre = createWindowedCentre(facts.width, facts.height, halfWidthPx)
  const margin = 3 * halfWidthPx
  const found = { frame: [] as number[], seconds: [] as number[], x: [] as number[], y: [] as number[] }
  let expected = 0
  await everyFrame(reader, background, signal, (frame, index) => {
    onProgress?.(facts.frameCount + index, total)
    const place = placeAt(motion, seconds[index]!)
    // A star image that is cut by the edge has its centre in the wrong place.
    if (place.x < margin || place.y < margin || place.x > facts.width - 1 - margin || place.y > facts.height - 1 - margin) return
    expected++
    const star = find(frame, { ...place, radius: TOLERANCE + halfWidthPx })
    if (!star || star.strength < LEAST_STRENGTH / 2) return
    const exact = centre(frame, star.x, star.y)
    if (!exact) return
    found.frame.push(index)
    found.seconds.push(seconds[index]!)
    found.x.push(exact.x)
    found.y.push(exact.y)
  })
  if (found.frame.length < 10) throw new DriftError(`The star was found in ${found.frame.length} frames only; a drift needs 10 at least. Let a brighter star cross the whole field.`)
  return {
    frame: Int32Array.from(found.frame), seconds: Float64Array.from(found.seconds), x: Float64Array.from(found.x), y: Float64Array.from(found.y),
    halfWidthPx, without: expected - found.frame.length,
  }
}

function trackMotion(rough: { seconds: number[], x: number[], y: number[] }, frames: number): Motion {
  if (rough.x.length < 10) throw new DriftError(`A star stands out in ${rough.x.length} of ${frames} frames only. Let a brighter star cross the field.`)
  const common = commonMotion(rough.seconds, rough.x, rough.y, TOLERANCE)
  if (!common || common.agree < Math.max(8, rough.x.length / 4)) throw new DriftError('No straight track of a star was found. Switch the drive off before recording, and let one bright star cross the field.')
  const motion = refineMotion(rough.seconds, rough.x, rough.y, common.motion, TOLERANCE)
  const span = Math.hypot(motion.vx, motion.vy) * (Math.max(...rough.seconds) - Math.min(...rough.seconds))
  if (span < 2 * TOLERANCE) throw new DriftError(`The star moves by ${span.toFixed(0)} px only: the drive seems to run. Switch it off, and let the star cross the field.`)
  return motion
}

/** Each frame's luminance without the background; the array is used again for the next frame. */
async function everyFrame(reader: FrameReader, background: Float32Array, signal: AbortSignal | undefined, visit: (frame: Float32Array, index: number) => void): Promise<void> {
  const plan = rawPlan(reader)
  const stride = plan.width * plan.height * plan.planes
  const block = Math.max(1, Math.floor(BLOCK_BYTES / (stride * 4)))
  const frame = new Float32Array(plan.width * plan.height)
  for (let first = 0; first < reader.facts.frameCount; first += block) {
    signal?.throwIfAborted()
    const { samples, count } = await reader.readFrames(first, Math.min(block, reader.facts.frameCount - first), signal)
    for (let k = 0; k < count; k++) {
      prepareLuminance(samples, k * stride, plan, frame)
      for (let i = 0; i < frame.length; i++) frame[i]! -= background[i]!
      visit(frame, first + k)
    }
  }
}
