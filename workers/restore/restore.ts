import type { RestorePlan } from '../../shared/schemas/restoration'
import type { Pause } from './convolve'
import { filterPlane, lucyPlane } from './deconvolve'
import { sharpenPlane, type WaveletPlan } from './wavelets'

export interface Restored {
  /** Planar, like the input. */
  samples: Float32Array
  /** Richardson-Lucy: rounds made; 0 otherwise. */
  rounds: number
}

/**
 * Carries out a plan on planar samples (planes × height × width); the input is not changed. `pause` is awaited between pieces of a
 * few ten milliseconds and may throw to end the work.
 */
export async function restore(samples: Float32Array, width: number, height: number, planes: number, plan: RestorePlan, pause: Pause): Promise<Restored> {
  const size = width * height
  const out = new Float32Array(samples)
  let rounds = 0
  if (plan.method === 'nothing') return { samples: out, rounds }
  for (let p = 0; p < planes; p++) {
    const image = samples.subarray(p * size, (p + 1) * size)
    const target = out.subarray(p * size, (p + 1) * size)
    const how = plan.planes[Math.min(p, plan.planes.length - 1)]!
    if (plan.method === 'wavelets') await sharpenInTiles(image, width, height, how, target, pause)
    else if (plan.method === 'wiener') target.set(await filterPlane(image, width, height, how.curve!, pause))
    else {
      const lucy = await lucyPlane(image, width, height, { transfer: how.curve!, iterations: plan.iterations, floor: how.floor, noise: plan.stopAtNoise ? how.noise : 0 }, pause)
      target.set(lucy.samples)
      rounds = Math.max(rounds, lucy.rounds)
    }
    await pause()
  }
  return { samples: out, rounds }
}

/** Side of the tiles of a large image, and the reach of the coarsest wavelet scale, px: 2 × (1 + 2 + … + 32). */
const TILE = 1024
export const WAVELET_REACH = 126

/** The same as sharpenPlane to the bit, tile by tile with a margin, so that a large image blocks nothing for long. */
async function sharpenInTiles(image: Float32Array, width: number, height: number, plan: WaveletPlan, out: Float32Array, pause: Pause): Promise<void> {
  if (width <= TILE && height <= TILE) return sharpenPlane(image, width, height, plan, out)
  for (let y0 = 0; y0 < height; y0 += TILE) {
    for (let x0 = 0; x0 < width; x0 += TILE) {
      const left = Math.max(0, x0 - WAVELET_REACH)
      const top = Math.max(0, y0 - WAVELET_REACH)
      const w = Math.min(width, x0 + TILE + WAVELET_REACH) - left
      const h = Math.min(height, y0 + TILE + WAVELET_REACH) - top
      const tile = new Float32Array(w * h)
      for (let y = 0; y < h; y++) tile.set(image.subarray((top + y) * width + left, (top + y) * width + left + w), y * w)
      const sharper = new Float32Array(w * h)
      sharpenPlane(tile, w, h, plan, sharper)
      const columns = Math.min(TILE, width - x0)
      for (let y = y0; y < Math.min(height, y0 + TILE); y++) {
        const from = (y - top) * w + x0 - left
        out.set(sharper.subarray(from, from + columns), y * width + x0)
      }
      await pause()
    }
  }
}
