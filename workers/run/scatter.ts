/**
 * How far the figures of a star's stack would scatter if the capture were taken again, from the capture itself. Two
 * causes are told apart, and their variances added:
 *
 * 1. Frames of like score differ (speckles, noise). The ladder holds sums of odd and of even ranks, rung by rung: two
 *    frames of neighbouring rank stand for each other. Every rung gives one difference of its halves, and the figure is
 *    taken with all of that rung from the one half and from the other. The squares of these changes add up to the variance
 *    (balanced repeated replication with two units a stratum: McCarthy 1969, Review of the International Statistical
 *    Institute 37, 239).
 * 2. Which scores the best frames reached is luck of the air, and neighbouring ranks share it. Blocks of time are left
 *    out in turn and the best share is selected anew (jackknife over blocks, which frames that follow each other closely do
 *    not deceive): the error of the mean score; and the rungs say what a change of the score does to the figure.
 */
import { keepCount } from '../../shared/schemas/run'
import { steadyLn } from '../../shared/steadymath'
import { stackLuminance } from '../score/figures'
import { halfWidth } from '../score/halfwidth'
import type { Ladder } from './ladder-pass'

/** A square of luminance about the star; x0, y0 is its corner in the frame. */
export interface Box { x0: number, y0: number, width: number, height: number }

/** The box of `side` px about a place, as far as the frame reaches. */
export function boxAbout(x: number, y: number, side: number, width: number, height: number): Box {
  const x0 = Math.max(0, Math.min(width - side, Math.round(x) - (side >> 1)))
  const y0 = Math.max(0, Math.min(height - side, Math.round(y) - (side >> 1)))
  return { x0, y0, width: Math.min(side, width), height: Math.min(side, height) }
}

/** Luminance of a box of planar samples. */
export function boxLuminance(samples: ArrayLike<number>, planes: 1 | 3, width: number, height: number, box: Box): Float32Array {
  const out = new Float32Array(planes * box.width * box.height)
  let o = 0
  for (let plane = 0; plane < planes; plane++) {
    for (let y = 0; y < box.height; y++) {
      const from = (plane * height + y + box.y0) * width + box.x0
      for (let x = 0; x < box.width; x++) out[o++] = samples[from + x]!
    }
  }
  return stackLuminance(out, planes, false, box.width, box.height)
}

/** Of one rung, in the box: sums of all frames and of those of even place, and how many of each cover a pixel. */
export type RungBox = Record<'sum' | 'even' | 'all' | 'half', Float32Array>

export function rungBox({ counts, sums, halves, planes, width, height }: Ladder, rung: number, box: Box, coverage: (count: number, every: 1 | 2) => ArrayLike<number>): RungBox {
  return {
    sum: boxLuminance(sums[rung]!, planes, width, height, box), even: boxLuminance(halves[rung]!, planes, width, height, box),
    all: boxLuminance(coverage(counts[rung]!, 1), 1, width, height, box), half: boxLuminance(coverage(counts[rung]!, 2), 1, width, height, box),
  }
}

/** Most strata; neighbouring rungs are put together beyond. */
const STRATA = 16

/**
 * What the mean of the frames up to a rung would change by if, within one stratum of ranks, one half stood for both: one
 * box of luminance per stratum, in sample units. The squares of these changes are the variance of every pixel.
 */
export function pairedChanges({ counts, scale }: Pick<Ladder, 'counts' | 'scale'>, rung: number, at: (rung: number) => RungBox): Float32Array[] {
  const total = counts[rung]!
  const nothing = () => new Float32Array(at(rung).sum.length)
  const changes: Float32Array[] = []
  let before: RungBox = { sum: nothing(), even: nothing(), all: nothing(), half: nothing() }
  let first = 0
  for (let k = 0; k <= rung; k++) {
    const last = counts[k]!
    // Places first … last − 1; those of even place are in `halves`.
    const even = Math.ceil(last / 2) - Math.ceil(first / 2)
    const odd = last - first - even
    if (even === 0 || odd === 0 || (k < rung && last - first < total / STRATA)) continue
    const now = at(k)
    // Variance of a stratum's sum from the difference of its halves' means: that times the root of both numbers.
    const factor = Math.sqrt(even * odd) / (total * scale)
    changes.push(now.sum.map((sum, i) => {
      const evens = now.half[i]! - before.half[i]!
      const odds = now.all[i]! - before.all[i]! - evens
      const evenSum = now.even[i]! - before.even[i]!
      return evens > 0 && odds > 0 ? factor * (evenSum / evens - (sum - before.sum[i]! - evenSum) / odds) : 0
    }))
    before = now
    first = last
  }
  return changes
}

export interface StarScatter { fwhm: number | null, lnShare: number | null }

/** Standard errors of full width (px) and of the peak's share of the light (relative) from the changes of pairedChanges. `lightOf` measures all light of a box. */
export function starScatter(mean: Float32Array, box: Box, changes: readonly Float32Array[], x: number, y: number, background: number, lightOf: (image: Float32Array) => number): StarScatter {
  const { width, height } = box
  const of = (image: Float32Array) => {
    const found = halfWidth(image, width, height, x - box.x0, y - box.y0, background, 0)
    return { fwhm: found.fwhm ?? NaN, lnShare: steadyLn(found.peak / lightOf(image)) }
  }
  const here = of(mean)
  let fwhm = 0
  let lnShare = 0
  for (const change of changes) {
    const there = of(mean.map((value, i) => value + change[i]!))
    fwhm += (there.fwhm - here.fwhm) ** 2
    lnShare += (there.lnShare - here.lnShare) ** 2
  }
  const root = (square: number) => (changes.length >= 3 && Number.isFinite(square) ? Math.sqrt(square) : null)
  return { fwhm: root(fwhm), lnShare: root(lnShare) }
}

/** Blocks of time for the scatter of the best frames' scores. */
const BLOCKS = 12
const LEAST_BLOCKS = 4

/**
 * Mean of `value` over the best `count` ranked frames, and its relative standard error by the jackknife over blocks of
 * time: each block is left out in turn, and the same share of what remains is selected anew (Künsch 1989, Annals of
 * Statistics 17, 1217). The error is null for fewer than eight kept frames.
 *
 * @param order ranked frames, best first; frame numbers ascend with time
 */
export function meanOfBest(order: Int32Array, value: ArrayLike<number>, count: number): { mean: number, error: number | null } {
  let mean = 0
  for (let place = 0; place < count; place++) mean += value[order[place]!]! / count
  const blocks = Math.min(BLOCKS, count >> 1)
  if (blocks < LEAST_BLOCKS || !(mean > 0)) return { mean, error: null }
  const last = order.reduce((most, frame) => Math.max(most, frame), 0) + 1
  const blockOf = (frame: number) => Math.floor(frame * blocks / last)
  const sizes = new Array<number>(blocks).fill(0)
  for (const frame of order) sizes[blockOf(frame)]!++
  const without = sizes.map((size, block) => {
    const wanted = keepCount(count / order.length, order.length - size)
    let sum = 0
    let taken = 0
    for (let place = 0; taken < wanted; place++) {
      if (blockOf(order[place]!) === block) continue
      sum += value[order[place]!]!
      taken++
    }
    return sum / Math.max(1, taken)
  })
  const middle = without.reduce((sum, m) => sum + m, 0) / blocks
  const square = without.reduce((sum, m) => sum + (m - middle) ** 2, 0) * (blocks - 1) / blocks
  return { mean, error: Math.sqrt(square) / mean }
}
