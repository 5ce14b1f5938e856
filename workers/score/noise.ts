/** Noise of a frame from the frame itself. */
import { quantileInPlace } from './blocks'

/**
 * Noise of one sample in the darker half of a frame: from second differences along rows (a slope cancels in them;
 * their variance is 6 sigma²), by the mean of their lower nine tenths.
 * @param lag distance of the samples: 1 where neighbours' noise is independent, so that detail hardly counts; 3 for
 * resampled frames and the luminance of a mosaic, whose neighbours share noise
 */
export function frameNoise(frame: Float32Array, width: number, height: number, lag = 3): number {
  const every = Math.max(1, Math.floor(width * height / 40_000))
  const levels = new Float32Array(Math.ceil(width * height / every))
  let n = 0
  for (let i = 0; i < width * height; i += every) levels[n++] = frame[i]!
  const middle = quantileInPlace(levels, n, 0.5)
  const differences = new Float32Array(Math.ceil(width * height / every) + 1)
  let m = 0
  for (let i = lag; i + lag < width * height; i += every) {
    const x = i % width
    // The brightness is judged two rows below: a sample chosen for being low would have the noise of low samples.
    if (x < lag || x + lag >= width || frame[i + 2 * width < width * height ? i + 2 * width : i - 2 * width]! > middle) continue
    // A slope cancels in the second difference; its variance is 6 sigma².
    differences[m++] = Math.abs(frame[i - lag]! - 2 * frame[i]! + frame[i + lag]!)
  }
  const most = quantileInPlace(differences, m, 0.9)
  if (m === 0) return 1e-6
  if (whole(levels, n) && most <= 6) return Math.max(0.2887, coarse(differences, m, most))
  let sum = 0
  let count = 0
  for (let k = 0; k < m; k++) {
    if (differences[k]! <= most) { sum += differences[k]!; count++ }
  }
  // Below its 90 % value the mean of |Gaussian| is 0.6573 sigma.
  return Math.max(1e-6, sum / count / 0.6573 / Math.sqrt(6))
}

/** A few units of noise on whole numbers: too many ties for quantiles, so the mean square up to what noise reaches. Rounding alone is 1/√12. */
function coarse(differences: Float32Array, m: number, most: number): number {
  let squares = 0
  let count = 0
  for (let k = 0; k < m; k++) {
    if (differences[k]! <= 2 * most + 1) { squares += differences[k]! * differences[k]!; count++ }
  }
  return Math.sqrt(squares / count / 6)
}

function whole(values: Float32Array, n: number): boolean {
  for (let i = 0; i < Math.min(n, 500); i++) if (!Number.isInteger(values[i]!)) return false
  return true
}
