/** Where patches lie. */
import { createWindowBlur } from '../score/blur'
import type { Place } from './types'

/** Tiles (and with them patches that are placed automatically) at most. */
export const MOST_PATCHES = 96
const LEAST_WINDOW = 64
const MOST_WINDOW = 256
/** Structure of a patch must stand this many times over what the reference's own noise would give. */
const LEAST_CONTRAST = 6
/** And be at least this share of the best patch's. */
const LEAST_SHARE = 0.12

/** Side of a patch's window, px: small, so that the air is alike in it, but with few enough of them; a power of two. */
export function patchWindow(width: number, height: number): number {
  let n = LEAST_WINDOW
  while (n < MOST_WINDOW && (2 * width / n) * (2 * height / n) > MOST_PATCHES) n *= 2
  return n
}

/** Distance of tiles, px: half a window, or what the limit on their number asks. */
export function patchSpacing(width: number, height: number, windowPx: number): number {
  return Math.max(windowPx / 2, Math.ceil(Math.sqrt(width * height / MOST_PATCHES)))
}

/**
 * Middles of tiles whose window holds structure: the rms of the band-passed reference, over what its noise gives there.
 * @param noise of one sample of the reference
 */
export function placePatches(reference: Float32Array, width: number, height: number, middles: Place[], windowPx: number, noise: number): Place[] {
  const fine = smooth(reference, width, height, 1.5)
  const coarse = smooth(reference, width, height, 5)
  // White noise through the difference of two Gaussians: 1/(4π) (1/1.5² + 1/5² − 4/(1.5² + 5²)).
  const grain = noise * Math.sqrt((1 / 2.25 + 1 / 25 - 4 / 27.25) / (4 * Math.PI))
  const half = windowPx >> 1
  const contrast = middles.map(({ x, y }) => {
    let sum = 0
    let n = 0
    for (let v = Math.max(0, Math.round(y) - half); v < Math.min(height, Math.round(y) + half); v++) {
      for (let u = Math.max(0, Math.round(x) - half); u < Math.min(width, Math.round(x) + half); u++) {
        sum += (fine[v * width + u]! - coarse[v * width + u]!) ** 2
        n++
      }
    }
    return Math.sqrt(sum / Math.max(1, n))
  })
  const best = Math.max(...contrast)
  return middles.filter((_, k) => contrast[k]! > LEAST_CONTRAST * grain && contrast[k]! > LEAST_SHARE * best)
}

function smooth(image: Float32Array, width: number, height: number, sigma: number): Float32Array {
  const out = new Float32Array(image.length)
  createWindowBlur(sigma, width, height).blur(image, width, height, 0, 0, width, height, out)
  return out
}
