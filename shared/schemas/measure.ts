/**
 * A measure of a double or multiple star on a stack. Angles on the screen run from up (towards row 0) counter-clockwise
 * through left, degrees; that is the position angle where north is up and east is left. Errors are standard errors.
 */
import { z } from 'zod'
import { usedCalibrationSchema } from './calibration'

const angleSchema = z.number().min(0).lt(360)
const errorSchema = z.number().nonnegative()

/** One component against the first (the brightest). */
export const pairValuesSchema = z.object({
  sepPx: z.number().nonnegative(), sepPxErr: errorSchema,
  paDeg: angleSchema, paDegErr: errorSchema,
  /** Magnitudes fainter than the first. */
  dMag: z.number(), dMagErr: errorSchema,
})

/** `undetermined` where the components are too alike to tell which is the brighter: the angle may be off by 180°. */
export const quadrants = ['determined', 'undetermined'] as const

export const stabilityRowSchema = z.object({
  /** Which frames: a keep fraction, or one half in time, of the frames kept. */
  of: z.union([z.object({ fraction: z.number() }), z.object({ half: z.enum(['first', 'second']) })]),
  frames: z.number().int().nonnegative(),
  /** In the order of the measure's components; null where the fit did not settle. */
  values: z.array(pairValuesSchema).nullable(),
})

export const measureWarningSchema = z.object({ code: z.string(), text: z.string() })

/** A pair measured by its fringes in the mean power spectrum of the frames: without any alignment. */
export const fringeMeasureSchema = z.object({
  frames: z.number().int().positive(), blocks: z.number().int().positive(),
  /** Null where the spectrum shows no fringes that stand out. */
  values: pairValuesSchema.extend({ quadrant: z.enum(quadrants) }).nullable(),
  /** Contrast of the fringes, 2β/(1 + β²), and how many errors the triple correlation tells the sides apart by. */
  visibility: z.number().min(0).max(1).nullable(), directionSigmas: z.number().nonnegative().nullable(),
  /** Cycles per px beyond which signal drowns in noise, and the radial power over that at 0 for 0, 1/window … cycles per px. */
  drownsAt: z.number().nonnegative(), windowPx: z.number().int().positive(), radialPower: z.array(z.number()),
})
export type FringeMeasure = z.infer<typeof fringeMeasureSchema>

export const pairMeasureSchema = z.object({
  kind: z.literal('measured'),
  /** Frames in the stack, and the keep fraction asked for. */
  frames: z.number().int().positive(), fraction: z.number(),
  /** Blocks of time that the errors come from; 0 where there were too few frames and the errors are the fit's own. */
  blocks: z.number().int().nonnegative(),
  /** Places on the stack, px; fluxes relative to the first. */
  components: z.array(z.object({ x: z.number(), y: z.number(), flux: z.number() })).min(2),
  /** Of each component but the first. */
  values: z.array(pairValuesSchema.extend({ quadrant: z.enum(quadrants) })).min(1),
  /** Whether the components were found without hints. */
  blind: z.boolean(),
  fwhmPx: z.number().positive(),
  /** Peak of the first component over the noise of the sky, from halves that were not aligned on each other's noise. */
  signalToNoise: z.number().nonnegative(),
  stability: z.array(stabilityRowSchema),
  /** The same pair by its fringes, where that was asked for, and the largest difference of both over its error. */
  fringes: fringeMeasureSchema.nullish(), fringesDiffer: z.number().nonnegative().nullish(),
  warnings: z.array(measureWarningSchema),
})

/** Nothing to measure, and why; `limits`: magnitudes fainter than the star that a companion at that distance could have and be missed. */
export const noMeasureSchema = z.object({
  kind: z.enum(['no-signal', 'unresolved']),
  frames: z.number().int().nonnegative(), fraction: z.number(),
  text: z.string(),
  fwhmPx: z.number().positive().nullable(),
  limits: z.array(z.object({ sepPx: z.number(), dMag: z.number() })),
  /** A pair too close for the stack may still show in its fringes. */
  fringes: fringeMeasureSchema.nullish(),
})

export const measureResultSchema = z.discriminatedUnion('kind', [pairMeasureSchema, noMeasureSchema])

export type PairValues = z.infer<typeof pairValuesSchema>
export type StabilityRow = z.infer<typeof stabilityRowSchema>
export type PairMeasure = z.infer<typeof pairMeasureSchema>
export type NoMeasure = z.infer<typeof noMeasureSchema>
export type MeasureResult = z.infer<typeof measureResultSchema>

export interface MeasureRequest {
  /** How many stars, 2 or 3. */
  components: 2 | 3
  fraction: number
  /** Places to begin with, px on the stack; without them the stars are found blind. */
  hints?: { x: number, y: number }[]
  /** Measures a pair by the fringes of its power spectrum as well; takes a transform or two of every frame. */
  fringes?: boolean
}

/** A measure as it is filed with a run: the values, what they were turned into arcseconds with, and when. */
export const runMeasureSchema = z.object({ measure: pairMeasureSchema, calibration: usedCalibrationSchema.nullable(), measuredAt: z.string() })
export type RunMeasure = z.infer<typeof runMeasureSchema>
