import { smoothB3 } from './atrous'

export interface WaveletPlan {
  /** Gain of each scale, finest first. */
  gains: readonly number[]
  /** Amplified is only what stands above this, of each scale, sample units. */
  thresholds: readonly number[]
}

/**
 * Adds up the à trous planes of one image plane with their gains. A gain above 1 takes of each coefficient only what stands
 * above its threshold, w + (g − 1) · sign(w) · max(0, |w| − t): continuous, so that no step is drawn into grain. A gain below 1
 * takes the whole coefficient. Gains of 1 everywhere return the image.
 */
export function sharpenPlane(image: Float32Array, width: number, height: number, { gains, thresholds }: WaveletPlan, out: Float32Array): void {
  const scratch = new Float32Array(image.length)
  let smooth = image
  let next: Float32Array = new Float32Array(image.length)
  out.set(image)
  // Coarse scales that are left as they are need not be made.
  let last = gains.length
  while (last > 0 && gains[last - 1] === 1) last--
  for (let j = 0; j < last; j++) {
    smoothB3(smooth, width, height, 2 ** j, next, scratch)
    const more = gains[j]! - 1
    const threshold = more > 0 ? thresholds[j] ?? 0 : 0
    if (more !== 0) {
      for (let i = 0; i < out.length; i++) {
        const w = smooth[i]! - next[i]!
        const excess = w < 0 ? Math.min(0, w + threshold) : Math.max(0, w - threshold)
        out[i]! += more * excess
      }
    }
    const free = smooth === image ? new Float32Array(image.length) : smooth
    smooth = next
    next = free
  }
}
