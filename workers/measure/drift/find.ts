import { createBlur } from './smooth'

export interface Found { x: number, y: number, /** Height of the smoothed star over its noise. */ strength: number }

/** Width (sigma, px) of the first smoothing: a star image of the usual sampling, and no single pixel. */
const SIGMA = 2

/**
 * Finds the brightest star image in a frame whose background was taken away.
 * @param near searches only within `radius` px of a place
 */
export function createFinder(width: number, height: number) {
  const smooth = createBlur(width, height, SIGMA)
  const sample = new Float32Array(Math.min(4096, width * height))
  return (frame: Float32Array, near: { x: number, y: number, radius: number } | null): Found | null => {
    const blurred = smooth(frame)
    const { middle, noise } = levels(blurred, sample)
    const x0 = near ? Math.max(1, Math.floor(near.x - near.radius)) : 1
    const x1 = near ? Math.min(width - 2, Math.ceil(near.x + near.radius)) : width - 2
    const y0 = near ? Math.max(1, Math.floor(near.y - near.radius)) : 1
    const y1 = near ? Math.min(height - 2, Math.ceil(near.y + near.radius)) : height - 2
    let best = -1
    for (let y = y0; y <= y1; y++) {
      for (let i = y * width + x0; i <= y * width + x1; i++) if (best < 0 || blurred[i]! > blurred[best]!) best = i
    }
    if (best < 0 || noise <= 0) return null
    return { x: best % width, y: Math.floor(best / width), strength: (blurred[best]! - middle) / noise }
  }
}

/** Median and robust standard deviation (1.4826 × median absolute deviation) of values spread over an image. */
function levels(image: Float32Array, sample: Float32Array): { middle: number, noise: number } {
  const step = image.length / sample.length
  for (let k = 0; k < sample.length; k++) sample[k] = image[Math.floor((k + 0.5) * step)]!
  sample.sort()
  const middle = sample[sample.length >> 1]!
  for (let k = 0; k < sample.length; k++) sample[k] = Math.abs(sample[k]! - middle)
  sample.sort()
  return { middle, noise: 1.4826 * sample[sample.length >> 1]! }
}
