/** A run: one recipe applied to one capture, with everything that came of it. */
import { z } from 'zod'
import { captureFactsSchema, targetKindSchema } from './capture'
import { evidenceSchema } from './evidence'
import { runMeasureSchema } from './measure'
import { recipeSchema, scoreMeasures } from './recipe'
import { restorePlanSchema } from './restoration'

/** The standard keep fractions of the proofs, ascending. */
export const proofFractions = [0.01, 0.02, 0.05, 0.1, 0.2, 0.5, 1] as const

/** Why a frame is not ranked. Every frame is either ranked or set aside for exactly one reason. */
export const setAsideReasons = ['saturated', 'empty', 'out-of-field', 'unsure', 'unreadable'] as const
export type SetAsideReason = typeof setAsideReasons[number]

/** Frames needed for a keep fraction: round(fraction × ranked), at least 1 while there is any. */
export function keepCount(fraction: number, ranked: number): number {
  return ranked === 0 ? 0 : Math.min(ranked, Math.max(1, Math.round(fraction * ranked)))
}

/** Figures of one stack. Lengths in px of the frame grid; null where a figure has no meaning for the target. */
export const stackFiguresSchema = z.object({
  /** Number of frames in the stack and their share of the ranked frames. */
  count: z.number().int().nonnegative(),
  fraction: z.number().min(0).max(1),
  /** Laplacian variance of the stack over its signal squared; larger is sharper. Comparable within one run. */
  sharpness: z.number(),
  /** Standard deviation of the background of the mean stack, in sample units, from half stacks where possible. */
  noise: z.number().nonnegative(),
  /** Brightest value over the background, in sample units. */
  peak: z.number(),
  /** Peak over noise. */
  signalToNoise: z.number().nonnegative(),
  fwhmPx: z.number().positive().nullable(),
  /** Standard error of fwhmPx from the scatter of the frames; null where too few frames tell it. */
  fwhmErrPx: z.number().nonnegative().nullable(),
  /** Peak over the diffraction-limited peak of the same flux; only with known optics. */
  strehl: z.number().min(0).max(2).nullable(),
  /** Standard errors of strehl and of noise, found like fwhmErrPx; absent in results of older versions. */
  strehlErr: z.number().nonnegative().nullable().optional(),
  noiseErr: z.number().nonnegative().nullable().optional(),
})

export const ladderInfoSchema = z.object({
  /** Ascending counts of frames; plane k of the filed ladder is the mean of the best counts[k] frames. */
  counts: z.array(z.number().int().positive()).min(1).max(128),
  width: z.number().int().positive(),
  height: z.number().int().positive(),
  planes: z.union([z.literal(1), z.literal(3)]),
})

export const displayStretchSchema = z.object({
  /** Sample values shown as black and as white, and the exponent between them (1 is linear). */
  black: z.number(),
  white: z.number(),
  gamma: z.number().min(0.1).max(10),
})

/** What the patches of an extended target say about its air. */
export const fieldFiguresSchema = z.object({
  /** Whether the stack is made of tiles with shifts and rankings of their own. */
  used: z.boolean(),
  windowPx: z.number().positive(),
  /** Middles of the patches, px of the stack. */
  places: z.array(z.object({ x: z.number(), y: z.number() })),
  /** How far the air moves parts of the field against each other, px rms, its standard error, and the distance over which it stays alike. */
  differsPx: z.number().nonnegative(),
  differsErrPx: z.number().nonnegative(),
  alikePx: z.number().nonnegative(),
})

/** Added to the places of a colour plane to land on green, px. */
const planeShiftSchema = z.object({ dx: z.number(), dy: z.number() })
/** null where a plane shares too little detail with green to be registered on it. */
export const colourShiftsSchema = z.object({ red: planeShiftSchema.nullable(), blue: planeShiftSchema.nullable() })

export const provenanceSchema = z.object({
  lullVersion: z.string(),
  /** Which arithmetic path computed it: "plain" or "simd". */
  path: z.string(),
  engine: z.string(),
  /** Milliseconds per pass. */
  timings: z.record(z.string(), z.number()),
})

/** Everything the client states about a run when it announces it. */
export const runResultSchema = z.object({
  facts: captureFactsSchema,
  recipe: recipeSchema,
  recipeHash: z.string().regex(/^[0-9a-f]{64}$/),
  kind: targetKindSchema,
  chosen: z.object({ rankBy: z.enum(scoreMeasures).optional(), blurPx: z.number(), windowPx: z.number(), centre: z.object({ x: z.number(), y: z.number() }), kind: targetKindSchema.optional() }),
  keep: z.object({ fraction: z.number(), count: z.number().int().nonnegative() }),
  /** Ranked frames and, per reason, those set aside. */
  ranked: z.number().int().nonnegative(),
  setAside: z.record(z.string(), z.number().int().nonnegative()),
  figures: stackFiguresSchema,
  /** Figures of the proofs, in the order of proofFractions, and of the plain unregistered average. */
  proofs: z.array(stackFiguresSchema),
  average: stackFiguresSchema,
  ladder: ladderInfoSchema,
  /** What the patches said; absent where there were none. */
  field: fieldFiguresSchema.optional(),
  /** How the colour planes lay; absent for grey stacks, and where the recipe leaves the colours as they are. */
  colours: colourShiftsSchema.optional(),
  stretch: displayStretchSchema,
  /** What the recipe's restoration came to for the filed stack; absent in runs of older versions. */
  restoration: restorePlanSchema.optional(),
  /** Runs of stars: transfer of the star's stack over the telescope's own at 0, step … cycles per px, as a reference for other captures. */
  starTransfer: z.object({ step: z.number().positive(), values: z.array(z.number()).min(2).max(512) }).nullable().optional(),
  /** The keep curve and what confirms it; absent in runs of older versions. */
  evidence: evidenceSchema.optional(),
  provenance: provenanceSchema,
  /** Of a double or multiple star, where its observer measured it before filing. */
  measure: runMeasureSchema.nullish(),
})

export type StackFigures = z.infer<typeof stackFiguresSchema>
export type FieldFigures = z.infer<typeof fieldFiguresSchema>
export type ColourShifts = z.infer<typeof colourShiftsSchema>
export type LadderInfo = z.infer<typeof ladderInfoSchema>
export type DisplayStretch = z.infer<typeof displayStretchSchema>
export type Provenance = z.infer<typeof provenanceSchema>
export type RunResult = z.infer<typeof runResultSchema>

/**
 * Files of a filed run. stack, average: FITS float32 · preview, thumbnail: 8-bit PNG as displayed ·
 * frames: the frame table (CSV) with scores, places and shifts · ladder: FITS float32 cube, one plane
 * a rung (3 planes a rung for colour, R G B) · proofs: 8-bit PNG sheet · recipe, facts: JSON · raw: the capture.
 */
export const requiredFileRoles = ['stack', 'average', 'preview', 'thumbnail', 'frames', 'ladder', 'proofs', 'recipe', 'facts'] as const
export const fileRoles = [...requiredFileRoles, 'raw'] as const
export type FileRole = typeof fileRoles[number]

export const runStates = ['announced', 'filed', 'deleted'] as const
export const reviewStates = ['none', 'waiting', 'accepted', 'another-pass'] as const
export type RunState = typeof runStates[number]
export type ReviewState = typeof reviewStates[number]
