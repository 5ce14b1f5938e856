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
    if (x < lag || x + lag >= width || frame[i]! > middle) continue
    // A slope cancels in the second difference; its variance is 6 sigma².
    differences[m++] = Math.abs(frame[i - lag]! - 2 * frame[i]! + frame[i + lag]!)
  }
  // Whole-number samples make ties at a low noise: the mean of the lower nine tenths is steadier than the median,
  // and rounding alone is worth 1/√12 of a unit.
  const most = quantileInPlace(differences, m, 0.9)
  let sum = 0
  let count = 0
  for (let k = 0; k < m; k++) {
    if (differences[k]! <= most) { sum += differences[k]!; count++ }
  }
  // Below its 90 % value the mean of |Gaussian| is 0.6573 sigma; ties at the limit raise it toward 0.798.
  const share = count / Math.max(1, m)
  const meanOf = 0.6573 + (0.7979 - 0.6573) * Math.min(1, Math.max(0, (share - 0.9) / 0.1))
  const rounding = whole(levels, n) ? 0.2887 : 1e-6
  return Math.max(rounding, m > 0 ? sum / Math.max(1, count) / meanOf / Math.sqrt(6) : 0)
}

function whole(values: Float32Array, n: number): boolean {
  for (let i = 0; i < Math.min(n, 500); i++) if (!Number.isInteger(values[i]!)) return false
  return true
}
