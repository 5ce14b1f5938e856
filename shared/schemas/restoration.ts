/** What a restoration did: the numbers that the recipe and the measured stacks came to. Filed with a run. */
import { z } from 'zod'

export const restoreMethods = ['nothing', 'wavelets', 'richardson-lucy', 'wiener'] as const
export type RestoreMethod = typeof restoreMethods[number]

const curveSchema = z.object({
  /** Cycles per px between values. */
  step: z.number().positive().max(1),
  values: z.array(z.number()).min(2).max(2048),
})

export const restorePlanSchema = z.object({
  method: z.enum(restoreMethods),
  /** Why nothing is restored, for the user; empty otherwise. */
  reason: z.string().max(400),
  /** One for each colour plane. */
  planes: z.array(z.object({
    /** Wavelets: gain and threshold (sample units) of each scale, finest first. */
    gains: z.array(z.number()).max(6),
    thresholds: z.array(z.number()).max(6),
    /** Wiener: the filter by frequency. Richardson-Lucy: the transfer of the point-spread function. */
    curve: curveSchema.nullable(),
    /** Level of the dark sky and noise of a sample, sample units. */
    floor: z.number(),
    noise: z.number().nonnegative(),
  })).max(3),
  /** Richardson-Lucy: at most so many rounds, and whether they end at the noise. */
  iterations: z.number().int().nonnegative().max(1000),
  stopAtNoise: z.boolean(),
  /** Extended targets: Strehl ratio of the stack and D/r0 of the air, from how the transfer changes with the fraction kept. */
  strehl: z.number().min(0).max(1).nullable(),
  apertureOverR0: z.number().positive().nullable(),
})
export type RestorePlan = z.infer<typeof restorePlanSchema>
