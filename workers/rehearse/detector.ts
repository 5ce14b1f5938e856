/** From expected electrons to the counts that a detector would write. */
import type { RehearsalSpec } from './spec'
import { createRandom } from './random'

export interface Detector {
  /** Counts at which it clips. */
  readonly saturation: number
  /** `electrons` of one frame, in frame order; writes width × height counts at `offset`. */
  expose(frame: number, electrons: Float64Array, out: Uint8Array | Uint16Array, offset: number): void
}

export function createDetector(spec: RehearsalSpec): Detector {
  const { gain, bias, readNoise, skyElectrons, bitDepth, hotPixels, hotElectrons } = spec.detector
  const saturation = 2 ** bitDepth - 1
  const pixels = spec.width * spec.height
  const place = createRandom(spec.seed, 5)
  const base = new Float64Array(pixels).fill(skyElectrons)
  for (let i = 0; i < hotPixels; i++) base[Math.floor(place.uniform() * pixels)]! += hotElectrons[0] + (hotElectrons[1] - hotElectrons[0]) * place.uniform()
  return {
    saturation,
    expose(frame, electrons, out, offset) {
      const random = createRandom(spec.seed, 6, frame)
      for (let i = 0; i < pixels; i++) {
        const counted = random.poisson(electrons[i]! + base[i]!) + readNoise * random.normal()
        const counts = Math.round(bias + gain * counted)
        out[offset + i] = counts < 0 ? 0 : counts > saturation ? saturation : counts
      }
    },
  }
}

/** Plane (0 R, 1 G, 2 B) that each pixel of the mosaic sees. */
export function mosaicPlanes(pattern: 'RGGB' | 'GRBG' | 'GBRG' | 'BGGR', width: number, height: number): Uint8Array {
  const planes = Uint8Array.from({ length: 4 }, (_, i) => 'RGB'.indexOf(pattern[i]!))
  const result = new Uint8Array(width * height)
  for (let y = 0, at = 0; y < height; y++) for (let x = 0; x < width; x++, at++) result[at] = planes[(y & 1) * 2 + (x & 1)]!
  return result
}
