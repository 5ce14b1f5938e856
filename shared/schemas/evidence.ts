/** Evidence for a keep fraction: what the stacks of a run hold at many fractions, from independent halves. Filed with a run. */
import { z } from 'zod'

/**
 * strehl: Strehl ratio of a star's stack · core: share of a star's light in its brightest pixel, over that of the sharpest stack
 * (optics not known) · transfer: how much of an extended target's contrast is left at two frequencies.
 */
export const evidenceMeasures = ['strehl', 'core', 'transfer'] as const

export const evidencePointSchema = z.object({
  count: z.number().int().positive(),
  fraction: z.number().min(0).max(1),
  /** The measure, and its standard error; null where too few frames tell it. For transfer: at the lower frequency. */
  sharpness: z.number(),
  sharpnessErr: z.number().nonnegative().nullable(),
  /** Transfer at the higher frequency; null for stars. */
  finer: z.number().nullable(),
  finerErr: z.number().nonnegative().nullable(),
  /** Stars: what differs between halves about the star, rms over its peak. Extended: noise over signal at the higher frequency. */
  noise: z.number().nonnegative(),
  /** Finest period, px, at which half of the power of the stack agrees between halves; null for stars or where none does. */
  reachPx: z.number().positive().nullable(),
})
export type EvidencePoint = z.infer<typeof evidencePointSchema>

export const evidenceSchema = z.object({
  measure: z.enum(evidenceMeasures),
  /** Cycles per px of the two transfers; null for stars. */
  frequencies: z.tuple([z.number(), z.number()]).nullable(),
  /** True where the transfers are against the telescope alone, false where against the sharpest stack. */
  absolute: z.boolean(),
  /** Ascending fractions. */
  points: z.array(evidencePointSchema).max(64),
  /** False: what the frames hold cannot be told from noise. */
  signal: z.boolean(),
  /** Correlation of a stack with the reference, frames and pixels that neither the reference nor the alignment used; null where it cannot be had. */
  confirmed: z.number().min(-1).max(1).nullable(),
  /** The same with the very pixels that were aligned: what the alignment puts into noise as well. */
  drawn: z.number().min(-1).max(1).nullable(),
  /** How far two halves of the pixels rank frames alike, as reliability of the whole score, 0-1; null where it cannot be had. */
  reliability: z.number().min(-1).max(1).nullable(),
})
export type Evidence = z.infer<typeof evidenceSchema>
