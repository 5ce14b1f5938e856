/**
 * Plans and results of survey and scoring. Plain data: plans cross worker boundaries as they are.
 *
 * survey.ts  survey(luminance: Float32Array[], width, height): Survey
 * plan.ts    makeScorePlan(survey, recipe, clippable: boolean): ScorePlan
 * scorer.ts  createScorer(plan: ScorePlan): { score(luminance: Float32Array, clippedSamples: number, out: FrameScore): void }
 * figures.ts stackFigures(stack, …): StackFigures
 */
import type { TargetKind } from '../../shared/schemas/capture'

/** Everything known of one frame after scoring. Depends on that frame and the plan alone. */
export interface FrameScore {
  /** Variance of the Laplacian of the smoothed target, less its noise floor, over the squared brightness; larger is sharper. */
  laplacian: number
  /** Brightest smoothed value over the background, over the brightness of the target; larger is sharper. */
  peak: number
  /** Brightness that both scores are divided by: a star's flux in its aperture, or an extended target's mean over the background; sample units. */
  flux: number
  /** Level beside the target (star, disc) or 0 where the target fills the field; sample units. */
  background: number
  /** Place of the target, px: a star's brightest smoothed point, sub-pixel; a disc's centroid; for a target that fills the field the moved window centre. */
  x: number
  y: number
  /** Clipped samples on the target: the score cannot be trusted. */
  saturated: boolean
  /** No target above the noise. */
  empty: boolean
  /** The target touches the edge of the frame. */
  outOfField: boolean
}

/** How a target is followed from frame to frame. */
export type TargetForm = 'star' | 'disc' | 'field'

/** Coarse guide for targets that fill the field: a binned, band-passed reference for the scorer's search. */
export interface CoarseGuide {
  /** Frame pixels per guide pixel, a power of two. */
  bin: number
  /** Side of the square transform, a power of two. */
  size: number
  /** Binned luminance of the reference, width/bin × height/bin (whole pixels only). */
  samples: Float32Array
  width: number
  height: number
}

export interface ScorePlan {
  width: number
  height: number
  kind: TargetKind
  form: TargetForm
  /** Sigma of the Gaussian before scoring, px. */
  blurPx: number
  /** Side of the window around the target, px. */
  windowPx: number
  /** Where the target (or the window, for a target that fills the field) is in the reference, px. */
  centre: { x: number, y: number }
  /** Noise of one luminance sample at the background, sample units. */
  noise: number
  /** Typical level beside the target, sample units; 0 for a target that fills the field. */
  background: number
  /** Clipped samples from which a frame counts as saturated. */
  saturatedSamples: number
  /** Only for form "field". */
  guide: CoarseGuide | null
}

/** What the survey found in frames spread over the capture. */
export interface Survey {
  kind: TargetKind
  form: TargetForm
  /** Noise of one luminance sample at the background, sample units. */
  noise: number
  background: number
  /** Full width at half maximum of the sharpest detail, px; null where none was measured. */
  detailPx: number | null
  blurPx: number
  windowPx: number
  centre: { x: number, y: number }
  /** True where nothing in the capture stands above the noise (METHODS: alignment on noise). */
  noSignal: boolean
  /** Why, for the user; empty where there is signal. */
  noSignalText: string
  /** Provisional reference: luminance, full frame, from the sharpest surveyed frames. */
  reference: Float32Array
  /** Place of the target in it, px. */
  refX: number
  refY: number
}
