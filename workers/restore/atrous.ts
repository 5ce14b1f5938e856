/**
 * The à trous ("with holes") wavelet transform with the B3 spline: Starck & Murtagh, Astronomical Image and
 * Data Analysis. c_j is c_(j-1) smoothed by [1 4 6 4 1]/16 with 2^(j-1) px between taps, and
 * w_j = c_(j-1) - c_j; the image is exactly the sum of all w_j and the last c_J.
 */

/** Standard deviation of w_1, w_2, … for white noise of 1; computed from the kernel, agrees with Starck & Murtagh's table. */
export const waveletNoise = [0.8908, 0.2007, 0.0855, 0.0412, 0.0204, 0.0102] as const

/** Smooths one plane with holes of `step` px; edges are mirrored. `scratch` has the size of the plane. */
export function smoothB3(image: Float32Array, width: number, height: number, step: number, out: Float32Array, scratch: Float32Array): void {
  smoothRows(image, width, height, step, scratch)
  smoothColumns(scratch, width, height, step, out)
}

function smoothRows(image: Float32Array, width: number, height: number, step: number, out: Float32Array): void {
  const index = mirroredTaps(width, step)
  const two = 2 * step
  // Where all taps lie inside, without looking their places up; the same sum in the same order.
  const from = Math.min(width, two)
  const to = Math.max(from, width - two)
  for (let y = 0; y < height; y++) {
    const row = y * width
    for (let x = 0; x < width; x = x + 1 === from ? to : x + 1) {
      const t = x * 5
      out[row + x] = (image[row + index[t]!]! + image[row + index[t + 4]!]!
        + 4 * (image[row + index[t + 1]!]! + image[row + index[t + 3]!]!) + 6 * image[row + x]!) / 16
    }
    for (let i = row + from; i < row + to; i++) {
      out[i] = (image[i - two]! + image[i + two]! + 4 * (image[i - step]! + image[i + step]!) + 6 * image[i]!) / 16
    }
  }
}

function smoothColumns(image: Float32Array, width: number, height: number, step: number, out: Float32Array): void {
  const index = mirroredTaps(height, step)
  for (let y = 0; y < height; y++) {
    const t = y * 5
    const a = index[t]! * width, b = index[t + 1]! * width, c = y * width, d = index[t + 3]! * width, e = index[t + 4]! * width
    for (let x = 0; x < width; x++) {
      out[c + x] = (image[a + x]! + image[e + x]! + 4 * (image[b + x]! + image[d + x]!) + 6 * image[c + x]!) / 16
    }
  }
}

/** Indexes of the five taps at each place, mirrored about the first and last sample. */
function mirroredTaps(length: number, step: number): Int32Array {
  const taps = new Int32Array(length * 5)
  const period = Math.max(1, 2 * (length - 1))
  for (let i = 0; i < length; i++) {
    for (let k = 0; k < 5; k++) {
      const at = (((i + (k - 2) * step) % period) + period) % period
      taps[i * 5 + k] = at < length ? at : period - at
    }
  }
  return taps
}

/** Planes w_1 … w_scales and the smooth rest. */
export function decompose(image: Float32Array, width: number, height: number, scales: number): { details: Float32Array[], smooth: Float32Array } {
  const scratch = new Float32Array(image.length)
  const details: Float32Array[] = []
  let smooth = image
  for (let j = 0; j < scales; j++) {
    const next = new Float32Array(image.length)
    smoothB3(smooth, width, height, 2 ** j, next, scratch)
    const detail = new Float32Array(image.length)
    for (let i = 0; i < detail.length; i++) detail[i] = smooth[i]! - next[i]!
    details.push(detail)
    smooth = next
  }
  return { details, smooth }
}
