/** Grid sizes of a rehearsal, chosen from the optics, the air and the frame. */
import { lambdaOverDArcsec } from '../../shared/optics'
import { pixelScaleArcsec, type RehearsalSpec } from './spec'

export interface Geometry {
  /** Fine pixels on a side of a detector pixel: 1 unless the detector undersamples. */
  oversample: number
  /** λ/D at the wavelength of the optics, fine px. */
  lambdaOverDPx: number
  /** Side of the point-spread function and of the scene's canvas, fine px, powers of two. */
  psfSize: number
  canvasSize: number
  /** Target's place in the frame without motion, frame px. */
  middleX: number
  middleY: number
}

/** Largest distance of the target from its middle over the whole capture, px; shake counted at four sigmas. */
function reach(spec: RehearsalSpec): number {
  const { motion } = spec
  const last = spec.frames * spec.intervalMs / 1000 / (1 - spec.dropShare)
  const jumps = motion.jumps.reduce((sum, jump) => sum + Math.max(Math.abs(jump.dx), Math.abs(jump.dy)), 0)
  const drift = Math.max(Math.abs(motion.startX), Math.abs(motion.startY), Math.abs(motion.startX + motion.rateXPxPerS * last), Math.abs(motion.startY + motion.rateYPxPerS * last))
  return drift + motion.periodicPx + 4 * motion.shakePx + jumps
}

const powerOfTwo = (value: number) => 2 ** Math.ceil(Math.log2(value))

export function rehearsalGeometry(spec: RehearsalSpec): Geometry {
  const scale = pixelScaleArcsec(spec.optics)
  const lambdaOverD = lambdaOverDArcsec(spec.optics.apertureMm, spec.optics.wavelengthNm)
  // Blue light through a mosaic has the finest detail; it must still be sampled at two pixels for λ/D.
  const finest = lambdaOverD * (spec.detector.mosaic === 'none' ? 1 : Math.min(1, 450 / spec.optics.wavelengthNm))
  const oversample = Math.min(8, Math.max(1, Math.ceil(2.02 * scale / finest)))
  const lambdaOverDPx = lambdaOverD / scale * oversample
  // The seeing disc is about (D/r0) λ/D wide; six of them hold its halo.
  const halo = Math.max(6 * spec.air.apertureOverR0, 12) * lambdaOverDPx
  const psfSize = Math.min(1024, Math.max(64, powerOfTwo(halo)))
  const frame = Math.max(spec.width, spec.height) * oversample
  // An extended scene fills the canvas; the frame must stay clear of its seam by the halo and the motion.
  const extended = spec.scene.kind === 'terrain' ? 2 * reach(spec) * oversample + Math.min(halo / 3, 48) : Math.min(reach(spec) * oversample, frame / 2)
  return {
    oversample, lambdaOverDPx, psfSize, canvasSize: Math.min(4096, Math.max(psfSize, powerOfTwo(frame + extended))),
    middleX: Math.floor(spec.width / 2), middleY: Math.floor(spec.height / 2),
  }
}
