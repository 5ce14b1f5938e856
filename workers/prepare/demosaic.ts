/**
 * Colour from a 2 × 2 mosaic: Malvar, He & Cutler 2004, "High-quality linear interpolation for demosaicing of
 * Bayer-patterned color images", ICASSP III-485. Linear 5 × 5 kernels, in units of 1/8; edges are mirrored about
 * the edge pixel, which keeps the order of colours.
 */
import type { MosaicPattern } from '../../shared/schemas/capture'

/** Column and row (0 or 1) of the red sample in a 2 × 2 cell. */
export function redSite(pattern: MosaicPattern): { x: 0 | 1, y: 0 | 1 } {
  switch (pattern) {
    case 'GRBG': return { x: 1, y: 0 }
    case 'GBRG': return { x: 0, y: 1 }
    case 'BGGR': return { x: 1, y: 1 }
    default: return { x: 0, y: 0 }
  }
}

const mirror = (i: number, n: number): number => {
  if (n === 1) return 0
  let k = i
  if (k < 0) k = -k
  if (k >= n) k = 2 * (n - 1) - k
  return k < 0 ? 0 : k
}

let padded = new Float32Array(0)

/** Writes the planes R, G, B (3 × height × width) of one mosaic frame to `out`. */
export function demosaic(raw: Float32Array, width: number, height: number, pattern: MosaicPattern, out: Float32Array): void {
  const size = width * height
  const stride = width + 4
  if (padded.length < stride * (height + 4)) padded = new Float32Array(stride * (height + 4))
  const p = padded
  for (let y = -2; y < height + 2; y++) {
    const from = mirror(y, height) * width
    const to = (y + 2) * stride + 2
    for (let x = 0; x < width; x++) p[to + x] = raw[from + x]!
    p[to - 1] = raw[from + mirror(-1, width)]!
    p[to - 2] = raw[from + mirror(-2, width)]!
    p[to + width] = raw[from + mirror(width, width)]!
    p[to + width + 1] = raw[from + mirror(width + 1, width)]!
  }
  const red = redSite(pattern)
  const s2 = 2 * stride
  for (let y = 0; y < height; y++) {
    const redRow = (y & 1) === red.y
    const row = (y + 2) * stride + 2
    // On a red row the row's own colour is red and the other is blue; on a blue row the other way round.
    const own = redRow ? 0 : 2 * size
    const other = redRow ? 2 * size : 0
    const colourColumn = redRow ? red.x : 1 - red.x
    for (let x = 0; x < width; x++) {
      const i = row + x
      const o = y * width + x
      const c = p[i]!
      const cross1 = p[i - 1]! + p[i + 1]!
      const crossV = p[i - stride]! + p[i + stride]!
      const farH = p[i - 2]! + p[i + 2]!
      const farV = p[i - s2]! + p[i + s2]!
      const diagonal = p[i - stride - 1]! + p[i - stride + 1]! + p[i + stride - 1]! + p[i + stride + 1]!
      if ((x & 1) === colourColumn) {
        out[own + o] = c
        out[size + o] = 0.125 * (4 * c + 2 * (cross1 + crossV) - (farH + farV))
        out[other + o] = 0.125 * (6 * c + 2 * diagonal - 1.5 * (farH + farV))
      }
      else {
        out[size + o] = c
        out[own + o] = 0.125 * (5 * c + 4 * cross1 - diagonal - farH + 0.5 * farV)
        out[other + o] = 0.125 * (5 * c + 4 * crossV - diagonal - farV + 0.5 * farH)
      }
    }
  }
}
