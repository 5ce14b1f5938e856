/** Gaussian smoothing of a window of a frame, separable, without allocation per call. */
import { steadyExp } from '../../shared/steadymath'

/** Half a sampled Gaussian, k[0] the centre, normalised so that k[0] + 2 Σ k[i>0] = 1. Sigma 0 gives [1]. */
export function gaussianKernel(sigma: number): Float64Array {
  const reach = sigma > 0 ? Math.max(1, Math.ceil(2.8 * sigma)) : 0
  const k = new Float64Array(reach + 1)
  let sum = 0
  for (let i = 0; i <= reach; i++) {
    k[i] = reach === 0 ? 1 : steadyExp(-0.5 * (i / sigma) * (i / sigma))
    sum += i === 0 ? k[i]! : 2 * k[i]!
  }
  for (let i = 0; i <= reach; i++) k[i]! /= sum
  return k
}

/** Noise of a smoothed sample over the noise of one: Σ k² of the two-dimensional kernel, square root. */
export function blurNoiseGain(sigma: number): number {
  const k = gaussianKernel(sigma)
  let s = k[0]! * k[0]!
  for (let i = 1; i < k.length; i++) s += 2 * k[i]! * k[i]!
  return s
}

/**
 * Variance of the 4-neighbour Laplacian of smoothed unit white noise. 20 without smoothing
 * (Pech-Pacheco et al. 2000 for the operator; the value follows from its coefficients).
 */
export function laplacianNoiseGain(sigma: number): number {
  const k = gaussianKernel(sigma)
  const at = (i: number) => (Math.abs(i) < k.length ? k[Math.abs(i)]! : 0)
  // 1-D autocorrelations of the kernel a and of its second difference d: var = 2 (Σ d² Σ a² + (Σ d a)²).
  let aa = 0
  let dd = 0
  let da = 0
  for (let i = -k.length; i <= k.length; i++) {
    const d = at(i - 1) - 2 * at(i) + at(i + 1)
    aa += at(i) * at(i)
    dd += d * d
    da += d * at(i)
  }
  return 2 * (dd * aa + da * da)
}

export interface WindowBlur {
  /**
   * Smooths the columns [x0, x0 + columns) and rows [y0, y0 + rows) of a frame into out (rows × columns).
   * Beyond the frame its edge samples are repeated.
   */
  blur(frame: Float32Array, width: number, height: number, x0: number, y0: number, columns: number, rows: number, out: Float32Array): void
}

/** @param maxColumns largest window asked for; working memory is made for it once */
export function createWindowBlur(sigma: number, maxColumns: number, maxRows: number): WindowBlur {
  const k = gaussianKernel(sigma)
  const reach = k.length - 1
  const line = new Float64Array(maxColumns + 2 * reach)
  const across = new Float64Array(maxColumns * (maxRows + 2 * reach))
  const sum = new Float64Array(maxColumns)
  return {
    blur(frame, width, height, x0, y0, columns, rows, out) {
      const inside = x0 - reach >= 0 && x0 + columns + reach <= width
      for (let y = -reach; y < rows + reach; y++) {
        const fy = Math.min(height - 1, Math.max(0, y0 + y))
        const from = fy * width + x0 - reach
        const n = columns + 2 * reach
        if (inside) {
          for (let x = 0; x < n; x++) line[x] = frame[from + x]!
        }
        else {
          for (let x = 0; x < n; x++) line[x] = frame[fy * width + Math.min(width - 1, Math.max(0, x0 - reach + x))]!
        }
        const to = (y + reach) * columns
        const k0 = k[0]!
        if (reach === 2) {
          const k1 = k[1]!
          const k2 = k[2]!
          for (let x = 0; x < columns; x++) across[to + x] = k0 * line[x + 2]! + k1 * (line[x + 1]! + line[x + 3]!) + k2 * (line[x]! + line[x + 4]!)
        }
        else if (reach === 3) {
          const k1 = k[1]!
          const k2 = k[2]!
          const k3 = k[3]!
          for (let x = 0; x < columns; x++) across[to + x] = k0 * line[x + 3]! + k1 * (line[x + 2]! + line[x + 4]!) + k2 * (line[x + 1]! + line[x + 5]!) + k3 * (line[x]! + line[x + 6]!)
        }
        else {
          for (let x = 0; x < columns; x++) {
            let s = k0 * line[x + reach]!
            for (let j = 1; j <= reach; j++) s += k[j]! * (line[x + reach - j]! + line[x + reach + j]!)
            across[to + x] = s
          }
        }
      }
      for (let y = 0; y < rows; y++) {
        const middle = (y + reach) * columns
        const k0 = k[0]!
        for (let x = 0; x < columns; x++) sum[x] = k0 * across[middle + x]!
        for (let j = 1; j <= reach; j++) {
          const kj = k[j]!
          const up = middle - j * columns
          const down = middle + j * columns
          for (let x = 0; x < columns; x++) sum[x]! += kj * (across[up + x]! + across[down + x]!)
        }
        const to = y * columns
        for (let x = 0; x < columns; x++) out[to + x] = sum[x]!
      }
    },
  }
}
