/** Black and white points that suit a stack: robust background at black, the brightest part at white. */
import type { StackImage } from '~~/workers/api'
import type { DisplayStretch } from '~~/shared/schemas/run'

const SAMPLED = 20_000

/** Values at the given shares of the sorted samples (a regular subset of them, for speed). */
function quantiles(samples: Float32Array, shares: readonly number[]): number[] {
  const step = Math.max(1, Math.floor(samples.length / SAMPLED))
  const picked = new Float32Array(Math.ceil(samples.length / step))
  for (let i = 0, at = 0; at < samples.length; i++, at += step) picked[i] = samples[at]!
  picked.sort()
  return shares.map(share => picked[Math.min(picked.length - 1, Math.floor(share * (picked.length - 1)))]!)
}

/** For a star the maximum counts, however few its pixels are; the exponent lifts the halo a little. */
export function autoStretch(image: StackImage): DisplayStretch {
  const [dark, low, bright, high] = quantiles(image.samples, [0.005, 0.2, 0.999, 0.9995]) as [number, number, number, number]
  let max = -Infinity
  for (const value of image.samples) if (value > max) max = value
  const white = max > low ? max : low + 1
  // Where most of the picture is dark (a star), a gamma of 2 shows the rings; a planet or terrain is shown as it is.
  const star = bright - low < 0.35 * (white - low)
  return star ? { black: low, white, gamma: 1.8 } : { black: dark, white: high > dark ? high : dark + 1, gamma: 1 }
}
