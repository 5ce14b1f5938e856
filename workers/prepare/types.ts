/**
 * What `prepare` needs to know of a capture. Plain data: it crosses worker boundaries as it is.
 *
 * plan.ts   makePlan(facts, surveyFrames: Samples[], recipe): PreparePlan
 * frame.ts  prepareLuminance(samples, offset, plan, out: Float32Array): number   (clipped samples in the frame)
 *           prepareColour(samples, offset, plan, out: Float32Array): void        (outPlanes(plan) × height × width)
 *           outPlanes(plan): 1 | 3
 */
import type { MosaicPattern } from '../../shared/schemas/capture'

export interface PreparePlan {
  width: number
  height: number
  /** Planes of a stored frame: 1 for mono and mosaics, 3 for colour (R, G, B). */
  planes: 1 | 3
  mosaic: MosaicPattern
  /** Stored sample value at and above which the detector clips; null where not known. */
  saturation: number | null
  /** Hot and dead pixels, ascending, as indexes into one stored frame (planes × height × width). */
  hotPixels: Int32Array
  /**
   * For each of hotPixels four indexes of same-colour neighbours whose mean takes its place
   * (an index is repeated where fewer than four sound neighbours exist).
   */
  repairFrom: Int32Array
}
