import type { Optics, StackImage } from '../api'
import { halvesNoise, stackFigures, stackLuminance } from '../score/figures'
import { halfWidth } from '../score/halfwidth'
import { createScorer, emptyScore } from '../score/scorer'
import type { FrameScore } from '../score/types'
import type { StackFigures } from '../../shared/schemas/run'
import { steadyLn } from '../../shared/steadymath'
import type { Ladder } from './ladder-pass'
import { boxAbout, boxLuminance, meanOfBest, pairedChanges, rungBox, starScatter, type Box, type RungBox } from './scatter'
import type { Stacker } from './stacker'
import type { Surveyed } from './survey-frames'

export interface FigurerInput {
  stacker: Stacker
  ladder: Ladder
  /** Ranked frames, best first. */
  order: Int32Array
  /** Peak over brightness of each frame. */
  peak: Float64Array
  surveyed: Surveyed
  optics: Optics | null
}

/** Root of the sum of two squares. */
const both = (a: number, b: number): number => Math.sqrt(a * a + b * b)

/** Side of the box about a star in which its scatter is looked at, px. */
const BOX = 64

/** Figures of stacks of one run; the noise comes from half stacks, so that nothing that was aligned to itself is counted as signal. */
export class Figurer {
  readonly #in: FigurerInput
  readonly #noise = new Map<number, { noise: number, error: number | null }>()
  readonly #rungs = new Map<number, RungBox>()
  #home: { at: FrameScore, box: Box } | null = null
  readonly #widths = new Map<number, { lnFwhm: number, score: number }>()

  constructor(input: FigurerInput) {
    this.#in = input
  }

  of(image: StackImage): StackFigures {
    const { noise, error } = this.#noiseOf(image.count)
    const figures = this.#figures(image, image.count / Math.max(1, this.#in.stacker.ranked), noise)
    return { ...figures, noiseErr: error, ...this.#starErrors(image, figures) }
  }

  /** Figures of the plain unregistered average of `frames` frames; its noise is that of one frame over their root. */
  ofAverage(image: StackImage, frames: number): StackFigures {
    return { ...this.#figures(image, 1, this.#in.surveyed.survey.noise / Math.sqrt(Math.max(1, frames))), fwhmErrPx: null, strehlErr: null, noiseErr: null }
  }

  #figures({ samples, planes, count }: StackImage, fraction: number, noise: number): StackFigures {
    const { plan, score } = this.#in.surveyed
    const mosaic = planes === 1 && plan.mosaic !== 'none'
    return stackFigures({ stack: samples, planes, mosaic, noise, count, fraction, plan: score, optics: this.#in.optics })
  }

  /** Share of a star's light in its brightest pixel, and the share's relative standard error (null where too few frames tell it). */
  core(image: StackImage): { share: number, error: number | null } {
    const { width, height, planes } = this.#in.ladder
    const { at, box } = this.#homeOnce()
    const luminance = boxLuminance(image.samples, planes, width, height, box)
    const { peak } = halfWidth(luminance, box.width, box.height, at.x - box.x0, at.y - box.y0, at.background, 0)
    const light = this.#lightIn(box)(luminance)
    const figures = this.#figures(image, 1, 0)
    return { share: light > 0 ? Math.max(0, peak) / light : 0, error: this.#starErrors(image, { ...figures, strehl: 1 }).strehlErr }
  }

  /** What differs between halves about a star (within twice its full width), rms over its peak; null without halves. */
  grain(image: StackImage, fwhmPx: number): number | null {
    const { stacker, ladder: { width, height, planes } } = this.#in
    const rung = stacker.rungBelow(image.count)
    const halves = stacker.halves(rung)
    if (!halves) return null
    const { at } = this.#homeOnce()
    const box = boxAbout(at.x, at.y, Math.max(8, Math.ceil(4 * fwhmPx)), width, height)
    const [a, b] = halves.map(half => boxLuminance(half, planes, width, height, box)) as [Float32Array, Float32Array]
    const { peak } = halfWidth(boxLuminance(image.samples, planes, width, height, box), box.width, box.height, at.x - box.x0, at.y - box.y0, at.background, 0)
    let square = 0
    for (let i = 0; i < a.length; i++) square += 0.25 * (a[i]! - b[i]!) ** 2
    return peak > 0 ? Math.sqrt(square / a.length * stacker.countOf(rung) / image.count) / peak : null
  }

  /** Standard errors of a star's width and Strehl ratio; see scatter.ts. Null where too few frames tell them. */
  #starErrors(image: StackImage, { fwhmPx, strehl }: StackFigures): { fwhmErrPx: number | null, strehlErr: number | null } {
    const none = { fwhmErrPx: null, strehlErr: null }
    const { stacker, ladder, order, peak } = this.#in
    if (fwhmPx === null || ladder.counts.length === 0) return none
    const rung = stacker.rungBelow(image.count)
    const best = meanOfBest(order, peak, image.count)
    if (best.error === null) return none
    const { width, height, planes } = ladder
    const { at, box } = this.#homeOnce()
    const mean = boxLuminance(image.samples, planes, width, height, box)
    const changes = pairedChanges(ladder, rung, (k) => {
      const known = this.#rungs.get(k) ?? rungBox(ladder, k, box, (count, every) => stacker.coverage(count, every))
      this.#rungs.set(k, known)
      return known
    })
    const scatter = starScatter(mean, box, changes, at.x, at.y, at.background, this.#lightIn(box))
    if (scatter.fwhm === null || scatter.lnShare === null) return none
    const fewer = Math.sqrt(stacker.countOf(rung) / image.count)
    const slope = this.#widthByScore(image.count)
    return {
      fwhmErrPx: both(fewer * scatter.fwhm, fwhmPx * slope * best.error),
      strehlErr: strehl === null ? null : strehl * both(fewer * scatter.lnShare, best.error),
    }
  }

  /** Measures a star's light in a box as the Strehl ratio's own denominator does. */
  #lightIn(box: Box): (image: Float32Array) => number {
    const { score: plan } = this.#in.surveyed
    const centre = { x: plan.centre.x - box.x0, y: plan.centre.y - box.y0 }
    const scorer = createScorer({ ...plan, width: box.width, height: box.height, centre, windowPx: Math.min(512, 2 * plan.windowPx), noise: 0, guide: null })
    const score = emptyScore()
    return (image) => {
      scorer.score(image, 0, score)
      return score.flux
    }
  }

  /** Place of the star and a box about it, the same for all stacks, so that the rungs are cut once. */
  #homeOnce(): { at: FrameScore, box: Box } {
    if (this.#home) return this.#home
    const { ladder: { counts, sums, scale, planes, width, height } } = this.#in
    const last = counts.length - 1
    const at = this.#place(meanOfSum(sums[last]!, counts[last]! * scale), planes)
    this.#home = { at, box: boxAbout(at.x, at.y, BOX, width, height) }
    return this.#home
  }

  /** Change of the logarithm of the width with that of the mean score, from two rungs an octave apart. */
  #widthByScore(count: number): number {
    const { stacker, ladder } = this.#in
    const nearest = (wanted: number) => ladder.counts.reduce((best, n, k) => (Math.abs(n - wanted) < Math.abs(ladder.counts[best]! - wanted) ? k : best), 0)
    const a = this.#widthOf(nearest(count))
    const b = this.#widthOf(nearest(2 * count <= stacker.ranked ? 2 * count : count / 2))
    if (!a || !b || Math.abs(a.score - b.score) < 1e-3) return 0
    return (a.lnFwhm - b.lnFwhm) / (a.score - b.score)
  }

  #widthOf(rung: number): { lnFwhm: number, score: number } | null {
    const known = this.#widths.get(rung)
    if (known) return known
    const { ladder: { counts, sums, scale, planes, width, height }, order, peak } = this.#in
    const count = counts[rung]!
    const { at, box } = this.#homeOnce()
    const samples = meanOfSum(sums[rung]!, count * scale)
    const { fwhm } = halfWidth(boxLuminance(samples, planes, width, height, box), box.width, box.height, at.x - box.x0, at.y - box.y0, at.background, 0)
    const { mean } = meanOfBest(order, peak, count)
    if (fwhm === null || !(mean > 0)) return null
    const found = { lnFwhm: steadyLn(fwhm), score: steadyLn(mean) }
    this.#widths.set(rung, found)
    return found
  }

  /** Where the star is in a stack, its background and its light. */
  #place(samples: Float32Array, planes: 1 | 3) {
    const { score: plan } = this.#in.surveyed
    const score = emptyScore()
    createScorer({ ...plan, noise: 0, guide: null }).score(stackLuminance(samples, planes, false, plan.width, plan.height), 0, score)
    return score
  }

  /** Noise of the mean of `count` frames: from the halves of the rung below, scaled by the root of the counts. */
  #noiseOf(count: number): { noise: number, error: number | null } {
    const { stacker, surveyed } = this.#in
    const rung = stacker.rungBelow(count)
    const known = this.#noise.get(rung)
    const at = stacker.countOf(rung)
    const found = known ?? this.#measure(rung) ?? { noise: surveyed.survey.noise / Math.sqrt(Math.max(1, at)), error: null }
    this.#noise.set(rung, found)
    const factor = Math.sqrt(at / Math.max(1, count))
    return { noise: found.noise * factor, error: found.error === null ? null : found.error * factor }
  }

  /** Half the robust scatter of the difference of two half stacks; null where there are no halves. */
  #measure(rung: number): { noise: number, error: number | null } | null {
    const halves = this.#in.stacker.halves(rung)
    if (!halves) return null
    const { width, height } = this.#in.surveyed.plan
    const planes = halves[0].length === width * height ? 1 : 3
    const [a, b] = halves.map(half => stackLuminance(half, planes, false, width, height)) as [Float32Array, Float32Array]
    return { noise: halvesNoise(a, b), error: noiseError(a, b, width, height) }
  }
}

function meanOfSum(sum: Float64Array, by: number): Float32Array {
  const out = new Float32Array(sum.length)
  for (let i = 0; i < out.length; i++) out[i] = sum[i]! / by
  return out
}

/** Interleaved sets of squares of TILE px; each set covers the whole image evenly. */
const SETS = 8
const TILE = 4

/** Standard error of halvesNoise: the scatter between eight interleaved sets of small squares, each with its own noise, over the root of eight. */
export function noiseError(a: Float32Array, b: Float32Array, width: number, height: number): number | null {
  // Tiles of one set in a row of tiles are the same for four rows; no set gets more than its share and the edge's.
  const most = Math.ceil(width / TILE + SETS) * Math.ceil(height / TILE + SETS) * TILE * TILE / SETS + TILE * TILE * Math.ceil(height / TILE)
  const sets = Array.from({ length: SETS }, () => [new Float32Array(most), new Float32Array(most)] as const)
  const filled = new Int32Array(SETS)
  for (let y = 0; y < height; y++) {
    const down = 3 * Math.floor(y / TILE)
    for (let x = 0; x < width; x++) {
      const set = (Math.floor(x / TILE) + down) % SETS
      const at = filled[set]!++
      sets[set]![0][at] = a[y * width + x]!
      sets[set]![1][at] = b[y * width + x]!
    }
  }
  if (width * height < SETS * 64) return null
  const found = sets.map(([one, other], set) => halvesNoise(one.subarray(0, filled[set]), other.subarray(0, filled[set])))
  const mean = found.reduce((sum, v) => sum + v, 0) / SETS
  return Math.sqrt(found.reduce((sum, v) => sum + (v - mean) ** 2, 0) / (SETS - 1) / SETS)
}
