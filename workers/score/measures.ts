/** Sharpness measures and peak finding on smoothed windows. Pure, nothing allocated. */

/**
 * Variance of the 4-neighbour Laplacian over the inner part of an image (population variance).
 * Pech-Pacheco, Cristóbal, Chamorro-Martínez & Fernández-Valdivia 2000, ICPR 3, 314.
 */
export function laplacianVariance(image: Float32Array, columns: number, rows: number): number {
  if (columns < 3 || rows < 3) return 0
  let sum = 0
  let squares = 0
  for (let y = 1; y < rows - 1; y++) {
    const row = y * columns
    for (let i = row + 1; i < row + columns - 1; i++) {
      const l = image[i - columns]! + image[i + columns]! + image[i - 1]! + image[i + 1]! - 4 * image[i]!
      sum += l
      squares += l * l
    }
  }
  const n = (columns - 2) * (rows - 2)
  const mean = sum / n
  return squares / n - mean * mean
}

export interface PeakPlace { x: number, y: number, value: number }

/**
 * The maximum of a smooth image between samples: the quadratic through the 3 × 3 samples about the highest inner
 * sample, as least squares gives it; at most one pixel from that sample. Coordinates of the image.
 */
export function quadraticPeak(image: Float32Array, columns: number, rows: number, out: PeakPlace): void {
  let best = columns + 1
  let value = -Infinity
  for (let y = 1; y < rows - 1; y++) {
    for (let i = y * columns + 1; i < (y + 1) * columns - 1; i++) {
      const v = image[i]!
      if (v > value) { value = v; best = i }
    }
  }
  quadraticAt(image, columns, best, out)
}

/** The quadratic's extremum about the inner sample with this index. */
export function quadraticAt(image: Float32Array, columns: number, i: number, out: PeakPlace): void {
  const x = i % columns
  const y = (i - x) / columns
  const centre = image[i]!
  const gx = 0.5 * (image[i + 1]! - image[i - 1]!)
  const gy = 0.5 * (image[i + columns]! - image[i - columns]!)
  const xx = image[i + 1]! - 2 * centre + image[i - 1]!
  const yy = image[i + columns]! - 2 * centre + image[i - columns]!
  const xy = 0.25 * (image[i + columns + 1]! - image[i + columns - 1]! - image[i - columns + 1]! + image[i - columns - 1]!)
  const determinant = xx * yy - xy * xy
  let sx = 0
  let sy = 0
  if (determinant > 0 && xx < 0) {
    sx = Math.min(1, Math.max(-1, (xy * gy - yy * gx) / determinant))
    sy = Math.min(1, Math.max(-1, (xy * gx - xx * gy) / determinant))
  }
  out.x = x + sx
  out.y = y + sy
  out.value = centre + 0.5 * (gx * sx + gy * sy)
}
