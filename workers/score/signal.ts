/**
 * Is there anything? Aligning pure noise makes a convincing image (the template comes back; cf. Henderson 2013,
 * PNAS 110, 18037, from memory), so a capture without signal must be told before anything is stacked.
 *
 * Signal is either a bright spot that single frames show above their noise, or structure that two independent halves
 * of the frames share.
 */
import { createBlocks, fillBlocks, quantileInPlace } from './blocks'

/** Deviations that a spot must stand out; the highest of 10,000 noise values reaches 4. */
const SPOT_SIGMAS = 6
/** Share of the frames that must show it. */
const SPOT_SHARE = 0.15
/** Correlation of the two halves' block means that counts as structure. */
const HALVES = 0.5

export interface Signal { found: boolean, text: string, spotShare: number, halves: number }

export function findSignal(frames: Float32Array[], width: number, height: number, _noise: number): Signal {
  const blocks = createBlocks(width, height)
  const { means } = blocks
  const sorted = new Float32Array(means.length)
  const half = [new Float64Array(means.length), new Float64Array(means.length)]
  let spots = 0
  for (const [f, frame] of frames.entries()) {
    fillBlocks(frame, width, blocks)
    for (let i = 0; i < means.length; i++) half[f & 1]![i]! += means[i]!
    sorted.set(means)
    const middle = quantileInPlace(sorted, sorted.length, 0.5)
    for (let i = 0; i < means.length; i++) sorted[i] = Math.abs(means[i]! - middle)
    // The blocks' own scatter, so that correlated noise and uneven backgrounds are not taken for a spot.
    const sigma = 1.4826 * quantileInPlace(sorted, sorted.length, 0.5)
    let top = -Infinity
    for (const v of means) if (v > top) top = v
    if (top - middle > SPOT_SIGMAS * Math.max(sigma, 1e-9)) spots++
  }
  const spotShare = spots / Math.max(1, frames.length)
  const halves = frames.length >= 4 ? correlation(half[0]!, half[1]!) : 0
  const found = spotShare >= SPOT_SHARE || halves >= HALVES
  return {
    found,
    spotShare,
    halves,
    text: found
      ? ''
      : 'No signal: nothing in these frames stands above the noise, and two halves of them share no structure. Aligning them would draw a picture out of noise. Check that the target was in the field, the focus and the exposure.',
  }
}

function correlation(a: Float64Array, b: Float64Array): number {
  let ma = 0
  let mb = 0
  for (let i = 0; i < a.length; i++) { ma += a[i]!; mb += b[i]! }
  ma /= a.length
  mb /= b.length
  let ab = 0
  let aa = 0
  let bb = 0
  for (let i = 0; i < a.length; i++) {
    ab += (a[i]! - ma) * (b[i]! - mb)
    aa += (a[i]! - ma) ** 2
    bb += (b[i]! - mb) ** 2
  }
  return aa > 0 && bb > 0 ? ab / Math.sqrt(aa * bb) : 0
}
