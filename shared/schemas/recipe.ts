/**
 * The recipe: every choice that turns a capture into a result. One schema, versioned; a recipe of an
 * older version is migrated by shared/recipe/migrate.ts. Every field has its unit in its name or here.
 */
import { z } from 'zod'
import { restoreMethods, type RestoreMethod } from './restoration'

export const RECIPE_VERSION = 2

/** transfer: how much of the reference's detail a frame carries; known after registration, for extended targets. */
export const scoreMeasures = ['laplacian', 'peak', 'transfer'] as const
export const registerMethods = ['correlation', 'speckle', 'centroid'] as const
export const patchUses = ['auto', 'always', 'never'] as const
export const combineMethods = ['mean'] as const
export const resampleKernels = ['cubic6', 'cubic', 'bilinear', 'nearest'] as const
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
    /**
     * Register and rank parts of an extended target by themselves: where the air is seen to differ over the field, always, or never.
     * Without effect on stars.
     */
    patches: z.enum(patchUses),
    /** Middles of the patches, px of the stack (x right, y down); null places them where there is structure. */
    patchPlaces: z.array(z.object({ x: z.number(), y: z.number() }).strict()).min(6).max(96).nullable(),
    /** Lay the red and blue planes of colour stacks on the green one; without effect on grey captures. */
    alignColours: z.boolean(),
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
    /** What restores; null takes what fits the target (see restoringMethod). */
    method: z.enum(restoreMethods).nullable(),
    /** Wavelets: scales of the à trous transform, finest first, that have a gain; 1 to 6. */
    scales: z.number().int().min(1).max(6),
    /** Wavelets: gains from the measured transfer and noise, or by hand. */
    gainBy: z.enum(['transfer', 'hand']),
    /** Wavelets, by hand: gain of each scale, finest first; 1 leaves a scale as it is, 0 takes it away. */
    gains: z.array(z.number().min(0).max(10)).length(6),
    /** Wavelets: only what stands this many sigmas above the noise of its scale is amplified: one figure for all measured gains, … */
    thresholdSigma: z.number().min(0).max(10),
    /** … and one for each gain by hand, finest scale first. */
    thresholdsSigma: z.array(z.number().min(0).max(10)).length(6),
    /** What blurs: measured on the capture itself, on a reference star, or described by the next two. */
    psf: z.enum(['capture', 'analytic', 'reference']),
    /** Described blur: share of the light in the diffraction-limited core (0.01-1), the rest in a halo of this full width at half maximum, px. */
    psfCore: z.number().min(0.01).max(1),
    psfHaloPx: z.number().min(0.5).max(400),
    /** Transfer of a reference star's stack over the telescope's own: values at 0, step, 2 step … cycles per px. */
    psfReference: z.object({ name: z.string().min(1).max(120), step: z.number().positive().max(0.5), values: z.array(z.number().min(0).max(1)).min(2).max(512) }).strict().nullable(),
    /** Richardson-Lucy: rounds at most, and whether it ends earlier, where what is left unexplained is no more than the noise. */
    iterations: z.number().int().min(1).max(500),
    stop: z.enum(['noise', 'count']),
    /** Wiener: ratio of the powers of scene and noise; null measures it at each frequency from independent halves. */
    snr: z.number().min(0.1).max(1e6).nullable(),
  }).strict(),
}).strict()

export type Recipe = z.infer<typeof recipeSchema>
export type ScoreMeasure = typeof scoreMeasures[number]

/** The measure that ranks frames of a target: as the recipe says, or a star's peak and an extended target's transfer of detail. */
export function rankingMeasure(rankBy: ScoreMeasure | null, kind: 'star' | 'extended'): ScoreMeasure {
  if (kind === 'star') return rankBy === null || rankBy === 'transfer' ? 'peak' : rankBy
  return rankBy ?? 'transfer'
}

/** What restores a target: as the recipe says, or nothing for stars, whose cores are the result, and wavelets for extended targets. */
export function restoringMethod(method: RestoreMethod | null, kind: 'star' | 'extended'): RestoreMethod {
  return method ?? (kind === 'star' ? 'nothing' : 'wavelets')
}

export type RegisterMethod = typeof registerMethods[number]
export type ResampleKernel = typeof resampleKernels[number]

/** Defaults that suit a new user and a star. */
export const defaultRecipe: Recipe = {
  version: RECIPE_VERSION,
  prepare: { repairHotPixels: true },
  score: { rankBy: null, blurPx: null },
  register: { method: 'correlation', windowPx: null, centre: null, referenceFraction: 0.05, refineRounds: 2, patches: 'auto', patchPlaces: null, alignColours: true },
  keep: { fraction: 0.1 },
  combine: { method: 'mean', kernel: 'cubic6' },
  restore: {
    method: null, scales: 6, gainBy: 'transfer', gains: [1.5, 1.5, 1.2, 1, 1, 1], thresholdSigma: 1, thresholdsSigma: [3, 2, 1, 1, 1, 1],
    psf: 'capture', psfCore: 0.3, psfHaloPx: 16, psfReference: null, iterations: 30, stop: 'noise', snr: null,
  },
}
