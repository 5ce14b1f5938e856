/** Makes the frames of a rehearsal and their truth, in any order. */
import type { Samples } from '../decode/types'
import type { FrameTruth, RehearsalSpec } from './spec'
import { pixelScaleArcsec, rehearsalSpecSchema } from './spec'
import { dispersionArcsec } from '../../shared/astro/dispersion'
import { createAir } from './air'
import { createCourse } from './motion'
import { createDetector, mosaicPlanes } from './detector'
import { createPsfMaker, createPupil, psfPeak } from './pupil'
import { createSquareTransform, type Rows } from './fft2'
import { fieldNodes, type FieldNode } from './field'
import { rehearsalGeometry } from './geometry'
import { sceneTransfer } from './scene'

/** Effective wavelengths of the colours of a mosaic, nm (common practice, no source). */
const MOSAIC_WAVELENGTHS = [620, 530, 450] as const

export interface Simulator {
  readonly spec: RehearsalSpec
  readonly saturation: number
  readonly seconds: Float64Array
  /** Writes one frame at `offset` and returns its truth. */
  render(frame: number, out: Samples, offset: number): FrameTruth
}

/** psfs: one for each node of the field and colour, nodes × colours. */
interface Exposure { frame: number, psfs: Float64Array[], truth: FrameTruth, shiftX: number, shiftY: number }

export function createSimulator(given: RehearsalSpec): Simulator {
  const spec = rehearsalSpecSchema.parse(given)
  const geometry = rehearsalGeometry(spec)
  const { psfSize, canvasSize, oversample, lambdaOverDPx } = geometry
  const course = createCourse(spec)
  const detector = createDetector(spec)
  const canvas = createSquareTransform(canvasSize)
  const transfer = sceneTransfer(spec, geometry, canvas)
  const psfTransform = createSquareTransform(psfSize)
  const { optics, detector: { mosaic } } = spec
  const diameter = psfSize / lambdaOverDPx
  const air = createAir(spec.air, optics.apertureMm / 1000, spec.seed, diameter)
  const wavelengths = mosaic === 'none' ? [optics.wavelengthNm] : MOSAIC_WAVELENGTHS
  const colours = wavelengths.map((wavelength) => {
    const ratio = optics.wavelengthNm / wavelength
    const pupil = createPupil(psfSize, diameter * ratio, optics.obstruction, ratio === 1 ? 1 : 1 / ratio)
    // Blue stands higher than green, and red lower.
    const raised = spec.dispersion ? dispersionArcsec(wavelength, MOSAIC_WAVELENGTHS[1], spec.dispersion.altitudeDeg) / pixelScaleArcsec(optics) * oversample : 0
    const zenith = (spec.dispersion?.zenithDeg ?? 0) * Math.PI / 180
    return {
      raisedX: raised * Math.cos(zenith), raisedY: raised * Math.sin(zenith),
      ratio, pupil, maker: createPsfMaker(pupil, psfTransform), phase: new Float64Array(pupil.x.length),
      /** Cut-off frequency D/λ in cycles per canvas, and one for the grey edge. */
      band: Math.min(canvasSize / 2, Math.ceil(canvasSize * ratio / lambdaOverDPx) + 2),
    }
  })
  const nodes = fieldNodes(spec)
  const judged = colours.length === 3 ? 1 : 0
  const planeOf = mosaic === 'none' ? null : mosaicPlanes(mosaic, spec.width, spec.height)
  // An even number of fine pixels has its middle between two of them.
  const binOffset = oversample % 2 === 0 ? 0.5 : 0
  const work = new Float64Array(2 * canvasSize * canvasSize)
  const frameRows: Rows = { start: (-geometry.middleY * oversample - ((oversample - 1) >> 1)) & (canvasSize - 1), count: Math.min(canvasSize, spec.height * oversample) }
  const images = [0, 1].map(() => new Float64Array(spec.width * spec.height))

  /** The point-spread functions of one exposure. The fraction of a pixel of the target's place is in them, as a slope of the phase. */
  function expose(frame: number): Exposure {
    const place = course.place(frame)
    const fineX = place.x * oversample + binOffset
    const fineY = place.y * oversample + binOffset
    const shiftX = Math.round(fineX)
    const shiftY = Math.round(fineY)
    const slopeX = 2 * Math.PI * (fineX - shiftX) / psfSize
    const slopeY = 2 * Math.PI * (fineY - shiftY) / psfSize
    const start = course.seconds[frame]!
    const psfs = nodes.flatMap(node => colours.map(({ ratio, pupil, maker, phase, raisedX, raisedY }) => {
      const psf = new Float64Array(psfSize * psfSize)
      const gain = 1 / (spec.subSteps * pupil.power * psfSize * psfSize)
      for (let step = 0; step < spec.subSteps; step++) {
        air.phase(start + spec.exposureMs / 1000 * (step + 0.5) / spec.subSteps, pupil, ratio, phase, node.towards)
        for (let i = 0; i < phase.length; i++) phase[i]! += pupil.x[i]! * (slopeX + 2 * Math.PI * raisedX / psfSize) + pupil.y[i]! * (slopeY + 2 * Math.PI * raisedY / psfSize)
        maker.add(phase, gain, psf)
      }
      return psf
    }))
    const peak = psfPeak(psfs[(nodes.length >> 1) * colours.length + judged]!, psfSize)
    return {
      frame, psfs, shiftX, shiftY,
      truth: {
        frame, seconds: start, strehl: peak.value / colours[judged]!.pupil.peak,
        psfPeakX: (peak.x + shiftX - fineX) / oversample, psfPeakY: (peak.y + shiftY - fineY) / oversample,
        placeX: geometry.middleX + place.x, placeY: geometry.middleY + place.y,
        apertureOverR0: air.strength(start), transparency: course.transparency(frame),
      },
    }
  }

  /** Lays a point-spread function into the canvas, moved by whole pixels; what would leave the canvas is lost. */
  function lay(exposure: Exposure, psf: Float64Array, part: 0 | 1): void {
    const gain = exposure.truth.transparency
    const half = canvasSize / 2
    for (let row = 0; row < psfSize; row++) {
      const y = (row < psfSize / 2 ? row : row - psfSize) + exposure.shiftY
      if (y < -half || y >= half) continue
      const line = ((y + canvasSize) % canvasSize) * canvasSize
      for (let column = 0; column < psfSize; column++) {
        const x = (column < psfSize / 2 ? column : column - psfSize) + exposure.shiftX
        if (x < -half || x >= half) continue
        work[2 * (line + (x + canvasSize) % canvasSize) + part]! += gain * psf[row * psfSize + column]!
      }
    }
  }

  /** Reads the frame's pixels of one colour out of the canvas, binned. */
  function gather(image: Float64Array, part: 0 | 1, colour: number, { across, down }: FieldNode): void {
    const mask = canvasSize - 1
    const first = -((oversample - 1) >> 1)
    for (let y = 0, at = 0; y < spec.height; y++) {
      for (let x = 0; x < spec.width; x++, at++) {
        const weight = across[x]! * down[y]!
        if (weight === 0 || (planeOf && planeOf[at] !== colour)) continue
        let sum = 0
        for (let j = 0; j < oversample; j++) {
          const row = (((y - geometry.middleY) * oversample + first + j) & mask) * canvasSize
          for (let i = 0; i < oversample; i++) sum += work[2 * (row + (((x - geometry.middleX) * oversample + first + i) & mask)) + part]!
        }
        image[at]! += weight * sum
      }
    }
  }

  /** Rows that hold anything of either point-spread function. */
  function rowsOf(exposures: Exposure[]): Rows {
    const shifts = exposures.map(({ shiftY }) => shiftY)
    const start = Math.min(...shifts) - psfSize / 2
    return { start: start & (canvasSize - 1), count: Math.min(canvasSize, Math.max(...shifts) + psfSize / 2 - start) }
  }

  /** The image's transform: the scene's times the point-spread function's, which is nothing beyond the cut-off frequency. */
  function multiply(scene: Float64Array, band: number): void {
    for (let row = 0; row < canvasSize; row++) {
      const beyond = row > band && row < canvasSize - band
      for (let column = 0, at = 2 * row * canvasSize; column < canvasSize; column++, at += 2) {
        if (beyond || (column > band && column < canvasSize - band)) {
          work[at] = work[at + 1] = 0
          continue
        }
        const re = work[at]!
        const im = work[at + 1]!
        work[at] = re * scene[at]! - im * scene[at + 1]!
        work[at + 1] = re * scene[at + 1]! + im * scene[at]!
      }
    }
  }

  // Two frames share one complex transform, one as real and one as imaginary part; pairs are fixed by frame number, so
  // that rounding does not depend on which frames are asked for.
  let pair: { first: number, truths: FrameTruth[] } | null = null
  function renderPair(first: number): FrameTruth[] {
    if (pair?.first === first) return pair.truths
    const exposures = [expose(first), expose(Math.min(first + 1, spec.frames - 1))]
    for (const image of images) image.fill(0)
    nodes.forEach((node, k) => colours.forEach(({ band }, colour) => {
      work.fill(0)
      exposures.forEach((exposure, part) => lay(exposure, exposure.psfs[k * colours.length + colour]!, part as 0 | 1))
      canvas.forward(work, rowsOf(exposures), band)
      multiply(transfer.planes[Math.min(colour, transfer.planes.length - 1)]!, band)
      canvas.inverse(work, frameRows, band)
      gather(images[0]!, 0, colour, node)
      gather(images[1]!, 1, colour, node)
    }))
    pair = { first, truths: exposures.map(exposure => exposure.truth) }
    return pair.truths
  }

  return {
    spec, saturation: detector.saturation, seconds: course.seconds,
    render(frame, out, offset) {
      if (!(frame >= 0 && frame < spec.frames)) throw new RangeError(`A rehearsal of ${spec.frames} frames has no frame ${frame}.`)
      const part = frame & 1
      const truth = renderPair(frame - part)[part]!
      detector.expose(frame, images[part]!, out as Uint8Array | Uint16Array, offset)
      return truth
    },
  }
}
