import type { Recipe } from '../../shared/schemas/recipe'
import { decompose, waveletNoise } from './atrous'

/** How far a restoration goes beyond what was there, as a share of the image's range (0 is none). */
export interface Overshoot {
  /** Deepest dip below the darkest unrestored value nearby: dark rings around stars and limbs. */
  under: number
  /** Highest rise above the brightest unrestored value nearby; at a limb this is a bright rim, at a star it is wanted. */
  over: number
}

export interface Restored { samples: Float32Array, noise: number[], overshoot: Overshoot }

/**
 * Amplifies the finest `scales` wavelet scales of each plane by `gain`, of each coefficient only what
 * stands above `thresholdSigma` times the noise of its scale: w + (gain - 1) · sign(w) · max(0, |w| - t).
 * It is continuous at the threshold, so grain is left as it is and no step is drawn into it.
 *
 * The noise of w_1 is 1.4826 × its median absolute value (Gaussian noise; small features do not move a
 * median), and the other scales follow from the table for white noise. Planar samples in and out; the input
 * is not changed. `noise` is the sigma per pixel found in each plane.
 */
export function restore(samples: Float32Array, width: number, height: number, planes: number, how: Recipe['restore']): Restored {
  const size = width * height
  const out = new Float32Array(samples)
  const noise: number[] = []
  for (let plane = 0; plane < planes; plane++) {
    const image = samples.subarray(plane * size, (plane + 1) * size)
    noise.push(how.scales > 0 ? restorePlane(image, width, height, how, out.subarray(plane * size, (plane + 1) * size)) : 0)
  }
  const overshoot = how.scales > 0 ? overshootOf(samples, out, width, height, planes) : { under: 0, over: 0 }
  return { samples: out, noise, overshoot }
}

function restorePlane(image: Float32Array, width: number, height: number, how: Recipe['restore'], out: Float32Array): number {
  const { details } = decompose(image, width, height, how.scales)
  const sigma = 1.4826 * medianAbsolute(details[0]!) / waveletNoise[0]
  details.forEach((detail, j) => {
    const threshold = how.thresholdSigma * sigma * waveletNoise[Math.min(j, waveletNoise.length - 1)]!
    const more = how.gain - 1
    for (let i = 0; i < detail.length; i++) {
      const w = detail[i]!
      const excess = Math.abs(w) - threshold
      if (excess > 0) out[i]! += more * (w < 0 ? -excess : excess)
    }
  })
  return sigma
}

function medianAbsolute(values: Float32Array): number {
  const sorted = Float32Array.from(values, Math.abs).sort()
  return sorted.length === 0 ? 0 : (sorted[(sorted.length - 1) >> 1]! + sorted[sorted.length >> 1]!) / 2
}

/** Neighbourhood, in px to each side, within which an unrestored value excuses a restored one. */
const REACH = 2

/** How far `after` leaves the range of `before` within 2 px, over the range of `before`. */
export function overshootOf(before: Float32Array, after: Float32Array, width: number, height: number, planes: number): Overshoot {
  const size = width * height
  let under = 0, over = 0
  for (let plane = 0; plane < planes; plane++) {
    const old = before.subarray(plane * size, (plane + 1) * size)
    const low = spread(old, width, height, Math.min)
    const high = spread(old, width, height, Math.max)
    let least = Infinity, most = -Infinity
    for (const value of old) {
      if (value < least) least = value
      if (value > most) most = value
    }
    const range = most - least
    if (!(range > 0)) continue
    for (let i = 0; i < size; i++) {
      const value = after[plane * size + i]!
      under = Math.max(under, (low[i]! - value) / range)
      over = Math.max(over, (value - high[i]!) / range)
    }
  }
  return { under, over }
}

/** Running minimum or maximum over a square of 2 × REACH + 1 px, rows then columns. */
function spread(image: Float32Array, width: number, height: number, pick: (a: number, b: number) => number): Float32Array {
  const rows = new Float32Array(image.length)
  const out = new Float32Array(image.length)
  for (let y = 0; y < height; y++) {
    for (let x = 0; x < width; x++) {
      let value = image[y * width + x]!
      for (let k = Math.max(0, x - REACH); k <= Math.min(width - 1, x + REACH); k++) value = pick(value, image[y * width + k]!)
      rows[y * width + x] = value
    }
  }
  for (let y = 0; y < height; y++) {
    for (let x = 0; x < width; x++) {
      let value = rows[y * width + x]!
      for (let k = Math.max(0, y - REACH); k <= Math.min(height - 1, y + REACH); k++) value = pick(value, rows[k * width + x]!)
      out[y * width + x] = value
    }
  }
  return out
}
