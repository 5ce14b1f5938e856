/**
 * The recipe: every choice that turns a capture into a result. One schema, versioned; a recipe of an
 * older version is migrated by shared/recipe/migrate.ts. Every field has its unit in its name or here.
 */
import { z } from 'zod'

export const RECIPE_VERSION = 2

/** transfer: how much of the reference's detail a frame carries; known after registration, for extended targets. */
export const scoreMeasures = ['laplacian', 'peak', 'transfer'] as const
export const registerMethods = ['correlation', 'speckle', 'centroid'] as const
export const combineMethods = ['mean'] as const
export const resampleKernels = ['cubic', 'bilinear', 'nearest'] as const
export const windowSizes = [32, 64, 128, 256, 512] as const

export const recipeSchema = z.object({
  version: z.literal(RECIPE_VERSION),
  prepare: z.object({
    /** Find hot and dead pixels from the capture itself and repair them before scoring. */
    repairHotPixels: z.boolean(),
  }).strict(),
  score: z.object({
    /** The measure that ranks; all are always computed. null takes what fits the target (see rankingMeasure). */
    rankBy: z.enum(scoreMeasures).nullable(),
    /** Sigma of the Gaussian blur before scoring, px; null chooses it from noise and sampling. */
    blurPx: z.number().min(0).max(8).nullable(),
  }).strict(),
  register: z.object({
    method: z.enum(registerMethods),
    /** Side of the square window around the target, px; null chooses it from the target. */
    windowPx: z.union([z.literal(32), z.literal(64), z.literal(128), z.literal(256), z.literal(512)]).nullable(),
    /** Centre of the window in frame pixels (x right, y down); null finds the target. */
    centre: z.object({ x: z.number(), y: z.number() }).strict().nullable(),
    /** Share of the frames, best first, that make the reference, 0.001-1. */
    referenceFraction: z.number().min(0.001).max(1),
    /** How often the reference is remade from registered frames. */
    refineRounds: z.number().int().min(0).max(3),
  }).strict(),
  keep: z.object({
    /** Keep fraction, 0.001-1, in steps of 0.001. */
    fraction: z.number().min(0.001).max(1),
  }).strict(),
  combine: z.object({
    method: z.enum(combineMethods),
    kernel: z.enum(resampleKernels),
  }).strict(),
  restore: z.object({
    /** À trous B3 wavelet scales that are sharpened, 0 (nothing) to 5. */
    scales: z.number().int().min(0).max(5),
    /** Gain on each restored scale; 1 leaves it as it is. */
    gain: z.number().min(1).max(6),
    /** Wavelet coefficients below this many sigmas of the noise are not amplified. */
    thresholdSigma: z.number().min(0).max(10),
  }).strict(),
}).strict()

export type Recipe = z.infer<typeof recipeSchema>
export type ScoreMeasure = typeof scoreMeasures[number]

/** The measure that ranks frames of a target: as the recipe says, or a star's peak and an extended target's transfer of detail. */
export function rankingMeasure(rankBy: ScoreMeasure | null, kind: 'star' | 'extended'): ScoreMeasure {
  if (kind === 'star') return rankBy === null || rankBy === 'transfer' ? 'peak' : rankBy
  return rankBy ?? 'transfer'
}

export type RegisterMethod = typeof registerMethods[number]
export type ResampleKernel = typeof resampleKernels[number]

/** Defaults that suit a new user and a star. */
export const defaultRecipe: Recipe = {
  version: RECIPE_VERSION,
  prepare: { repairHotPixels: true },
  score: { rankBy: null, blurPx: null },
  register: { method: 'correlation', windowPx: null, centre: null, referenceFraction: 0.05, refineRounds: 2 },
  keep: { fraction: 0.1 },
  combine: { method: 'mean', kernel: 'cubic' },
  restore: { scales: 0, gain: 2, thresholdSigma: 3 },
}
