/** Smoothing for extended targets: where it is wide, on pixels binned two by two, at an eighth of the cost. */
import { createWindowBlur, laplacianNoiseGain } from './blur'

/** Smoothing from which binning loses nothing that would be judged, px. */
const BIN_FROM = 1.5

export interface Smoother {
  /** Frame pixels per pixel of the smoothed image. */
  readonly bin: 1 | 2
  /** Variance of the Laplacian of unit white noise after this smoothing. */
  readonly laplacianNoise: number
  readonly out: Float32Array
  /** Smooths a region inside the frame; the image has floor(columns/bin) × floor(rows/bin) pixels. */
  smooth(frame: Float32Array, width: number, height: number, x0: number, y0: number, columns: number, rows: number): void
}

/** At full sampling. */
export function fullSmoother(sigma: number, maxColumns: number, maxRows = maxColumns): Smoother {
  const blur = createWindowBlur(sigma, maxColumns, maxRows)
  const out = new Float32Array(maxColumns * maxRows)
  return {
    bin: 1, laplacianNoise: laplacianNoiseGain(sigma), out,
    smooth: (frame, width, height, x0, y0, columns, rows) => blur.blur(frame, width, height, x0, y0, columns, rows, out),
  }
}

/** Binned where the smoothing is wide enough. */
export function createSmoother(sigma: number, maxColumns: number, maxRows: number): Smoother {
  if (sigma < BIN_FROM) return fullSmoother(sigma, maxColumns, maxRows)
  // The mean of two by two has a variance of 1/4 px² by itself; the rest is left to the Gaussian.
  const rest = 0.5 * Math.sqrt(sigma * sigma - 0.25)
  const mostColumns = Math.ceil(maxColumns / 2)
  const mostRows = Math.ceil(maxRows / 2)
  const blur = createWindowBlur(rest, mostColumns, mostRows)
  const binned = new Float32Array(mostColumns * mostRows)
  const out = new Float32Array(mostColumns * mostRows)
  return {
    bin: 2, laplacianNoise: 0.25 * laplacianNoiseGain(rest), out,
    smooth(frame, width, _height, x0, y0, columns, rows) {
      const across = columns >> 1
      const down = rows >> 1
      for (let y = 0; y < down; y++) {
        const a = (y0 + 2 * y) * width + x0
        const b = a + width
        const to = y * across
        for (let x = 0; x < across; x++) binned[to + x] = 0.25 * (frame[a + 2 * x]! + frame[a + 2 * x + 1]! + frame[b + 2 * x]! + frame[b + 2 * x + 1]!)
      }
      blur.blur(binned, across, down, 0, 0, across, down, out)
    },
  }
}
