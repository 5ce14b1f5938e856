/** Figures of one stack: what the numbers beside an image say. */
import type { OpticsLike } from '../../shared/optics'
import { idealPeakShare } from '../../shared/optics'
import type { StackFigures } from '../../shared/schemas/run'
import { binomial } from '../prepare/frame'
import { starImages } from '../register/reference'
import { quantileInPlace } from './blocks'
import { halfWidth } from './halfwidth'
import { createScorer, emptyScore } from './scorer'
import { frameNoise } from './noise'
import type { ScorePlan } from './types'

export interface FiguresInput {
  /** Mean stack, planes × height × width. */
  stack: Float32Array
  planes: 1 | 3
  /** True for a plain average that still is a mosaic (one plane). */
  mosaic: boolean
  /**
   * Where the noise comes from: means of two halves of the same frames (every other one), a standard deviation found
   * elsewhere, or null: from the stack itself, which misses what resampling has smoothed.
   */
  noise: readonly [Float32Array, Float32Array] | number | null
  count: number
  fraction: number
  plan: ScorePlan
  optics: OpticsLike | null
}

/** Luminance as judged: the plane itself, (R + 2G + B)/4, or the same from a mosaic. */
export function stackLuminance(stack: Float32Array, planes: 1 | 3, mosaic: boolean, width: number, height: number): Float32Array {
  const size = width * height
  if (planes === 1 && !mosaic) return stack
  const out = new Float32Array(size)
  if (planes === 1) {
    binomial(stack, width, height, out)
    return out
  }
  for (let i = 0; i < size; i++) out[i] = 0.25 * (stack[i]! + 2 * stack[size + i]! + stack[2 * size + i]!)
  return out
}

export function stackFigures(input: FiguresInput): StackFigures {
  const { planes, plan, mosaic, optics } = input
  const { width, height } = plan
  const size = width * height
  const image = stackLuminance(input.stack, planes, mosaic, width, height)
  const noise = noiseOf(input, image)
  // The stack's own shift is zero: a field's guide has nothing to find here.
  const scorer = createScorer({ ...plan, noise, guide: null })
  const score = emptyScore()
  scorer.score(image, 0, score)
  const base = {
    count: input.count,
    fraction: input.fraction,
    sharpness: finite(score.laplacian),
    noise: finite(noise),
  }
  if (plan.form !== 'star') {
    const peak = finite(score.peak * score.flux)
    return { ...base, peak, signalToNoise: noise > 0 ? Math.max(0, peak) / noise : 0, fwhmPx: null, fwhmErrPx: null, strehl: null }
  }
  const stars = starImages(image, width, height, score.x, score.y, 0.7, plan.windowPx)
  const width0 = halfWidth(image, width, height, stars[0]!.x, stars[0]!.y, score.background, noise)
  const peak = finite(width0.peak)
  return {
    ...base,
    peak,
    signalToNoise: noise > 0 ? Math.max(0, peak) / noise : 0,
    fwhmPx: width0.fwhm,
    fwhmErrPx: width0.error,
    strehl: optics && score.flux > 0 ? strehl(planes === 3 ? input.stack.subarray(size, 2 * size) : image, plan, stars, optics) : null,
  }
}

const finite = (value: number): number => (Number.isFinite(value) ? value : 0)

function noiseOf({ noise, planes, mosaic, plan }: FiguresInput, image: Float32Array): number {
  if (typeof noise === 'number') return noise
  const { width, height } = plan
  if (noise === null) return frameNoise(image, width, height)
  const [a, b] = noise.map(half => stackLuminance(half, planes, mosaic, width, height)) as [Float32Array, Float32Array]
  return halvesNoise(a, b)
}

/**
 * Noise of the mean of two half stacks: scatter of half their difference, robust (median absolute deviation). The
 * target cancels, as far as both halves see it alike; where they differ at a star's core the median does not care.
 */
export function halvesNoise(a: Float32Array, b: Float32Array): number {
  const n = a.length
  const values = new Float32Array(n)
  for (let i = 0; i < n; i++) values[i] = 0.5 * (a[i]! - b[i]!)
  const middle = quantileInPlace(values, n, 0.5)
  for (let i = 0; i < n; i++) values[i] = Math.abs(values[i]! - middle)
  return 1.4826 * quantileInPlace(values, n, 0.5)
}

/**
 * Strehl estimate: the brightest star's peak over that of an ideal image with the same light. All light in the window
 * is counted and divided among the star images by their strengths; what the other stars' halos add under the peak is taken
 * off. Light outside of the window is missed, so that a small window makes the figure a little too high.
 */
function strehl(image: Float32Array, plan: ScorePlan, stars: ReturnType<typeof starImages>, optics: OpticsLike): number | null {
  const { width, height } = plan
  const score = emptyScore()
  // Twice the window for the light, as far as the frame reaches.
  const wide = createScorer({ ...plan, windowPx: Math.min(512, 2 * plan.windowPx), noise: 0, guide: null })
  wide.score(image, 0, score)
  if (!(score.flux > 0)) return null
  const first = stars[0]!
  const peak = halfWidth(image, width, height, first.x, first.y, score.background, 0).peak
  let total = 0
  let halo = 0
  for (const [i, star] of stars.entries()) {
    total += star.weight
    if (i > 0) halo += star.weight * ringLevel(image, width, height, first.x, first.y, star.x - first.x, star.y - first.y, score.background)
  }
  const own = score.flux / total
  const ratio = (peak - halo) / own / idealPeakShare(optics)
  return Number.isFinite(ratio) ? Math.min(2, Math.max(0, ratio)) : null
}

/** Median level over the background on the circle about (cx, cy) through (cx + dx, cy + dy). */
function ringLevel(image: Float32Array, width: number, height: number, cx: number, cy: number, dx: number, dy: number, background: number): number {
  const values: number[] = []
  let vx = dx
  let vy = dy
  for (let k = 0; k < 16; k++) {
    const x = Math.round(cx + vx)
    const y = Math.round(cy + vy)
    if (x >= 0 && y >= 0 && x < width && y < height) values.push(image[y * width + x]! - background)
    const tx = (12 * vx - 5 * vy) / 13
    vy = (5 * vx + 12 * vy) / 13
    vx = tx
  }
  values.sort((p, q) => p - q)
  return values.length > 0 ? Math.max(0, values[values.length >> 1]!) : 0
}
