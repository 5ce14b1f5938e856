import type { StackImage } from '../api'
import type { DisplayStretch } from '../../shared/schemas/run'

/** Samples looked at for the range; spread evenly over the image. */
const LOOK = 65_536

/**
 * A first display stretch: black at the 1st percentile (the sky or the dark side), white at the brightest
 * of the looked-at samples less 0.02 %, gamma 1 for extended detail. Monotone in the data, deterministic.
 */
export function displayRange({ samples }: StackImage): DisplayStretch {
  const step = Math.max(1, Math.floor(samples.length / LOOK))
  const some: number[] = []
  for (let i = 0; i < samples.length; i += step) if (Number.isFinite(samples[i]!)) some.push(samples[i]!)
  some.sort((a, b) => a - b)
  if (some.length === 0) return { black: 0, white: 1, gamma: 1 }
  const black = some[Math.floor(0.01 * (some.length - 1))]!
  const white = some[Math.floor(0.9998 * (some.length - 1))]!
  return { black, white: white > black ? white : black + 1, gamma: 1 }
}
