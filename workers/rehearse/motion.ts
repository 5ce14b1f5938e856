/** Where the target stands in each frame without air, when each frame was taken, and how much light came through. */
import type { RehearsalSpec } from './spec'
import { createRandom } from './random'

export interface Course {
  /** Seconds since the first frame; frames that were not written leave gaps. */
  readonly seconds: Float64Array
  /** From the middle of the frame, px. */
  place(frame: number): { x: number, y: number }
  transparency(frame: number): number
}

export function createCourse(spec: RehearsalSpec): Course {
  const seconds = new Float64Array(spec.frames)
  const drops = createRandom(spec.seed, 3)
  for (let frame = 0, slot = 0; frame < spec.frames; frame++, slot++) {
    while (frame > 0 && drops.uniform() < spec.dropShare) slot++
    seconds[frame] = slot * spec.intervalMs / 1000
  }
  const { motion, cloud } = spec
  return {
    seconds,
    place(frame) {
      const t = seconds[frame]!
      const shake = createRandom(spec.seed, 4, frame)
      let x = motion.startX + motion.rateXPxPerS * t + motion.periodicPx * Math.sin(2 * Math.PI * t / motion.periodS)
      let y = motion.startY + motion.rateYPxPerS * t
      if (motion.shakePx > 0) {
        x += motion.shakePx * shake.normal()
        y += motion.shakePx * shake.normal()
      }
      for (const jump of motion.jumps) {
        if (frame < jump.frame) continue
        x += jump.dx
        y += jump.dy
      }
      return { x, y }
    },
    transparency(frame) {
      if (!cloud) return 1
      const away = (seconds[frame]! - cloud.atS) / cloud.widthS
      return 1 - cloud.depth * Math.exp(-away * away)
    },
  }
}
