/**
 * A rehearsal: a simulated capture with known truth. Everything that makes it stands in the spec; the same
 * spec gives the same frames, in any order and any block size.
 *
 * Modelled: Kolmogorov or von Kármán phase in frozen flow of up to four layers, slow changes of its strength, finite
 * exposure, circular pupil with central obstruction, pixel integration, drift, shake, jumps, cloud, dropped frames,
 * photon and read noise, bias, hot pixels, dispersion between colours, colour-filter mosaics, clipping, quantisation, and
 * air that differs across the field (layers at a height).
 * Not modelled: scintillation.
 */
import { z } from 'zod'
import { plateScale } from '../../shared/optics'
import { mosaicPatterns } from '../../shared/schemas/capture'

const finite = z.number().refine(Number.isFinite)

const starSchema = z.object({
  /** From the scene's first star; arcsec, and degrees from north through east. */
  separationArcsec: z.number().min(0).max(3600),
  positionAngleDeg: z.number().min(0).lt(360),
  /** Magnitudes fainter than the first star. */
  deltaMag: z.number().min(-10).max(15),
}).strict()

export const sceneSchema = z.discriminatedUnion('kind', [
  z.object({ kind: z.literal('stars'), stars: z.array(starSchema).min(1).max(50), /** Electrons of a star of deltaMag 0 in one frame. */ fluxElectrons: z.number().min(0).max(1e9) }).strict(),
  z.object({
    kind: z.literal('planet'), seed: z.number().int(), diameterArcsec: z.number().positive().max(3600),
    /** Position angle of the planet's north pole, and the latitude at the middle of the disc. */
    poleDeg: z.number().min(0).lt(360), tiltDeg: z.number().min(-90).max(90),
    /** Electrons in a pixel of the brightest cloud at the middle of the disc in one frame. */
    fluxElectrons: z.number().min(0).max(1e7),
  }).strict(),
  z.object({
    kind: z.literal('terrain'), seed: z.number().int(),
    /** Height of the light above the ground and the position angle it comes from. */
    sunAltitudeDeg: z.number().min(1).max(90), sunAzimuthDeg: z.number().min(0).lt(360),
    fluxElectrons: z.number().min(0).max(1e7),
  }).strict(),
  z.object({ kind: z.literal('blank') }).strict(),
])

export const rehearsalSpecSchema = z.object({
  name: z.string().min(1).max(120),
  seed: z.number().int(),
  width: z.number().int().min(8).max(2048),
  height: z.number().int().min(8).max(2048),
  frames: z.number().int().min(1).max(1_000_000),
  /** Time of the first frame, ISO 8601 UTC. */
  start: z.string(),
  exposureMs: z.number().positive().max(60_000),
  intervalMs: z.number().positive().max(600_000),
  /** Instants of the air averaged in one exposure. */
  subSteps: z.number().int().min(1).max(64),
  optics: z.object({
    apertureMm: z.number().positive(), focalLengthMm: z.number().positive(), pixelSizeUm: z.number().positive(),
    /** Diameter of the obstruction over the aperture's. */
    obstruction: z.number().min(0).max(0.9), wavelengthNm: z.number().min(200).max(30_000),
  }).strict(),
  air: z.object({
    /** Aperture over Fried's parameter at the wavelength of the optics; 0 is no air at all. */
    apertureOverR0: z.number().min(0).max(40),
    /** Outer scale, m; null is Kolmogorov's infinite one. */
    outerScaleM: z.number().positive().nullable(),
    /** Shares of the turbulence (normalised to a sum of 1), wind speed, m/s, and direction in the frame, degrees from x towards y. */
    layers: z.array(z.object({
      share: z.number().positive(), speedMPerS: z.number().min(0).max(200), directionDeg: finite,
      /** Distance along the line of sight, m: from there on, parts of the field look through different air. Absent: at the telescope. */
      heightM: z.number().min(0).max(30_000).optional(),
    }).strict()).min(1).max(4),
    /** Slow rise and fall of D/r0: relative amplitude (0 is steady) and the time scale of the longest swing, s. */
    gusts: z.object({ amplitude: z.number().min(0).max(0.8), periodS: z.number().positive() }).strict(),
  }).strict(),
  scene: sceneSchema,
  /** Position angle of screen up. */
  upDeg: z.number().min(0).lt(360),
  motion: z.object({
    /** Place of the target in the first frame from the middle of the frame, px. */
    startX: finite, startY: finite,
    rateXPxPerS: finite, rateYPxPerS: finite,
    /** Periodic error of the drive along x, px and s. */
    periodicPx: z.number().min(0).max(1000), periodS: z.number().positive(),
    /** Shake of each frame, px rms on each axis. */
    shakePx: z.number().min(0).max(100),
    jumps: z.array(z.object({ frame: z.number().int().min(0), dx: finite, dy: finite }).strict()).max(100),
  }).strict(),
  /**
   * Colours drawn apart by the air (mosaics only): altitude of the target, and where the zenith lies in the frame, degrees from x
   * toward y. Absent: none.
   */
  dispersion: z.object({ altitudeDeg: z.number().min(5).max(90), zenithDeg: finite }).strict().optional(),
  /** A passing cloud: depth 0-1 of the light lost at its middle; null is a clear sky. */
  cloud: z.object({ atS: finite, widthS: z.number().positive(), depth: z.number().min(0).max(1) }).strict().nullable(),
  /** Share of frames that the computer failed to write; their times are missing. */
  dropShare: z.number().min(0).max(0.5),
  detector: z.object({
    bitDepth: z.union([z.literal(8), z.literal(10), z.literal(12), z.literal(14), z.literal(16)]),
    /** Counts per electron, counts at no light, electrons rms. */
    gain: z.number().positive(), bias: z.number().min(0), readNoise: z.number().min(0),
    skyElectrons: z.number().min(0),
    hotPixels: z.number().int().min(0).max(100_000),
    /** Electrons of a hot pixel, from and to. */
    hotElectrons: z.tuple([z.number().min(0), z.number().min(0)]),
    mosaic: z.enum(mosaicPatterns),
  }).strict(),
}).strict()

export type RehearsalSpec = z.infer<typeof rehearsalSpecSchema>
export type Scene = z.infer<typeof sceneSchema>

/** What is true of one frame. Positions in px of the frame, x right, y down. */
export interface FrameTruth {
  frame: number
  /** Seconds since the first frame. */
  seconds: number
  /** Peak of the point-spread function over the diffraction-limited peak. */
  strehl: number
  /** Brightest point of the point-spread function from where the star would stand without air. */
  psfPeakX: number
  psfPeakY: number
  /** Where the first star, or the middle of the scene, would stand without air. */
  placeX: number
  placeY: number
  /** Aperture over Fried's parameter at that time. */
  apertureOverR0: number
  /** Light that the cloud let through, 0-1. */
  transparency: number
}

/** Arcseconds on one pixel. */
export function pixelScaleArcsec(optics: RehearsalSpec['optics']): number {
  return plateScale(optics.pixelSizeUm, optics.focalLengthMm)
}
