/**
 * What a capture says of itself, and what a user may correct.
 *
 * Units are in the names. Pixel (0, 0) is the centre of the first pixel in memory (top left on the
 * screen), x to the right, y down. Times are UTC.
 */
import { z } from 'zod'

export const captureFormats = ['ser', 'fits', 'tiff', 'png', 'jpeg', 'avi', 'rehearsal'] as const
export const mosaicPatterns = ['none', 'RGGB', 'GRBG', 'GBRG', 'BGGR'] as const
export const sampleKinds = ['uint8', 'uint16', 'float32'] as const
export const byteOrders = ['little', 'big'] as const
export const targetKinds = ['star', 'extended'] as const

export const captureFormatSchema = z.enum(captureFormats)
export const mosaicPatternSchema = z.enum(mosaicPatterns)
export const byteOrderSchema = z.enum(byteOrders)
export const targetKindSchema = z.enum(targetKinds)

/** One thing the reader noticed. `level` "trouble" is shown with emphasis; the text is a full plain sentence. */
export const captureNoteSchema = z.object({
  code: z.string(),
  level: z.enum(['info', 'trouble']),
  text: z.string(),
})

/** How the byte order of multi-byte samples was decided. */
export const byteOrderDecisionSchema = z.object({
  value: byteOrderSchema,
  decidedBy: z.enum(['format', 'content', 'header', 'user']),
})

export const captureTimesSchema = z.object({
  /** ISO 8601 UTC of the first and the last frame, null where the capture does not say. */
  start: z.string().nullable(),
  end: z.string().nullable(),
  source: z.enum(['trailer', 'keywords', 'header', 'user', 'none']),
  /** Median of the intervals between frames; null where the capture has no per-frame times. */
  medianIntervalMs: z.number().nullable(),
  /** Frames missing in the sequence of times: gaps over 1.5 median intervals, in missing frames. */
  droppedFrames: z.number().int().nonnegative(),
  /** True where the times are not in ascending order. */
  disordered: z.boolean(),
})

export const captureFactsSchema = z.object({
  name: z.string(),
  format: captureFormatSchema,
  fileCount: z.number().int().positive(),
  sizeBytes: z.number().int().nonnegative(),
  /** SHA-256 (hex) over name-independent identity: size, header and sampled blocks. See workers/source/fingerprint.ts. */
  fingerprint: z.string(),
  width: z.number().int().positive(),
  height: z.number().int().positive(),
  /** Whole frames that can be read. */
  frameCount: z.number().int().positive(),
  /** What the header declares; differs from frameCount in a truncated capture. */
  declaredFrameCount: z.number().int().nonnegative(),
  /** 1 for mono and mosaics, 3 for colour. */
  planes: z.union([z.literal(1), z.literal(3)]),
  mosaic: mosaicPatternSchema,
  sampleKind: z.enum(sampleKinds),
  /** True bits of a sample, 1-16; 32 for float. */
  bitDepth: z.number().int().positive(),
  /** Sample value at which the detector clips; null for float data that does not say. */
  saturation: z.number().nullable(),
  byteOrder: byteOrderDecisionSchema,
  times: captureTimesSchema,
  exposureMs: z.number().positive().nullable(),
  observer: z.string(),
  instrument: z.string(),
  telescope: z.string(),
  object: z.string(),
  filter: z.string(),
  apertureMm: z.number().positive().nullable(),
  focalLengthMm: z.number().positive().nullable(),
  pixelSizeUm: z.number().positive().nullable(),
  notes: z.array(captureNoteSchema),
})

/** Corrections by the user; an absent field keeps what the capture says. */
export const captureOverridesSchema = z.object({
  byteOrder: byteOrderSchema.optional(),
  mosaic: mosaicPatternSchema.optional(),
  exposureMs: z.number().positive().nullable().optional(),
  observer: z.string().max(200).optional(),
  instrument: z.string().max(200).optional(),
  telescope: z.string().max(200).optional(),
  object: z.string().max(200).optional(),
  filter: z.string().max(100).optional(),
  apertureMm: z.number().positive().nullable().optional(),
  focalLengthMm: z.number().positive().nullable().optional(),
  pixelSizeUm: z.number().positive().nullable().optional(),
  start: z.string().nullable().optional(),
}).strict()

export type CaptureFormat = z.infer<typeof captureFormatSchema>
export type MosaicPattern = z.infer<typeof mosaicPatternSchema>
export type SampleKind = typeof sampleKinds[number]
export type ByteOrder = z.infer<typeof byteOrderSchema>
export type TargetKind = z.infer<typeof targetKindSchema>
export type CaptureNote = z.infer<typeof captureNoteSchema>
export type CaptureTimes = z.infer<typeof captureTimesSchema>
export type CaptureFacts = z.infer<typeof captureFactsSchema>
export type CaptureOverrides = z.infer<typeof captureOverridesSchema>
