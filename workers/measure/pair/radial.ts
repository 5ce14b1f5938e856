import type { MeasureImage } from './types'

/** Median of the image over circles about a place, in bins of one pixel: what a companion on one side hardly changes. */
export function radialMedian({ samples, width, height }: MeasureImage, x0: number, y0: number): Float32Array {
  const bins: number[][] = []
  for (let y = 0; y < height; y++) {
    for (let x = 0; x < width; x++) {
      const bin = Math.round(Math.hypot(x - x0, y - y0));
      (bins[bin] ??= []).push(samples[y * width + x]!)
    }
  }
  let last = 0
  return Float32Array.from(bins, (values) => {
    if (!values?.length) return last
    values.sort((a, b) => a - b)
    return (last = values[values.length >> 1]!)
  })
}

/** The image without a profile of circles about a place (linear between bins). */
export function withoutProfile({ samples, width, height }: MeasureImage, profile: Float32Array, x0: number, y0: number): Float32Array {
  const out = new Float32Array(samples.length)
  for (let y = 0; y < height; y++) {
    for (let x = 0; x < width; x++) {
      const r = Math.hypot(x - x0, y - y0)
      const bin = Math.min(profile.length - 2, Math.floor(r))
      const share = Math.min(1, r - bin)
      out[y * width + x] = samples[y * width + x]! - (profile[bin]! * (1 - share) + profile[bin + 1]! * share)
    }
  }
  return out
}

/** Full width at half maximum of a profile over its sky, px. */
export function profileWidth(profile: Float32Array, sky: number): number {
  const half = sky + (profile[0]! - sky) / 2
  let bin = 0
  while (bin < profile.length - 1 && profile[bin + 1]! > half) bin++
  const above = profile[bin]!
  const below = profile[Math.min(bin + 1, profile.length - 1)]!
  return 2 * Math.max(0.8, bin + (above > below ? (above - half) / (above - below) : 0.5))
}
