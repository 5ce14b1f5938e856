/** Stated errors of a star's figures against their scatter over many simulated captures whose frames depend on each other in time. */
import { describe, expect, it } from 'vitest'
import { halfWidth } from '../../workers/score/halfwidth'
import { noiseError } from '../../workers/run/figures'
import { halvesNoise } from '../../workers/score/figures'
import { meanOfBest, pairedChanges, rungBox, starScatter } from '../../workers/run/scatter'
import type { Ladder } from '../../workers/run/ladder-pass'
import { rungCounts } from '../../workers/stack/rungs'
import { gaussianNoise } from './support/noise'

const SIZE = 32
const FRAMES = 300
const box = { x0: 0, y0: 0, width: SIZE, height: SIZE }
const spot = (i: number, fwhm: number) => Math.exp(-4 * Math.LN2 * (((i % SIZE) - 16) ** 2 + (Math.floor(i / SIZE) - 16) ** 2) / fwhm ** 2)
const shapes = [3, 4, 6, 14].map(fwhm => Float32Array.from({ length: SIZE * SIZE }, (_, i) => spot(i, fwhm) / fwhm ** 2))
const light = (image: Float32Array) => image.reduce((sum, v) => sum + v, 0)

/** Frames of a core and halo whose share, width and grain drift along (autoregressive, 0.8 from frame to frame). */
function capture(seed: number) {
  const random = gaussianNoise(seed)
  let luck = 0
  let shape = 0
  return Array.from({ length: FRAMES }, () => {
    luck = 0.8 * luck + 0.6 * random()
    shape = 0.5 * shape + 0.866 * random()
    const share = 1 / (1 + Math.exp(0.5 - 0.6 * luck))
    const wide = 1 / (1 + Math.exp(-shape))
    return Float32Array.from({ length: SIZE * SIZE }, (_, i) => 2e4 * (share * (0.6 * shapes[0]![i]! + 0.4 * ((1 - wide) * shapes[1]![i]! + wide * shapes[2]![i]!)) + (1 - share) * shapes[3]![i]!) + 2 * random())
  })
}

/** The stack of the best `count` and the stated errors of its width and of the peak's share of the light (relative). */
function stacked(frames: Float32Array[], count: number) {
  const peak = frames.map(frame => frame[16 * SIZE + 16]! / light(frame))
  const order = Int32Array.from(peak.keys()).sort((a, b) => peak[b]! - peak[a]! || a - b)
  const ladder: Ladder = { counts: rungCounts(FRAMES), planes: 1, width: SIZE, height: SIZE, scale: 1, kernel: 'cubic', sums: [], halves: [] } as Ladder
  const sum = new Float64Array(SIZE * SIZE)
  const half = new Float64Array(SIZE * SIZE)
  let place = 0
  for (const n of ladder.counts) {
    for (; place < n; place++) frames[order[place]!]!.forEach((v, i) => { sum[i]! += v; if (place % 2 === 0) half[i]! += v })
    ladder.sums.push(sum.slice())
    ladder.halves.push(Float32Array.from(half))
  }
  const rung = ladder.counts.indexOf(count)
  const mean = Float32Array.from(ladder.sums[rung]!, v => v / count)
  const changes = pairedChanges(ladder, rung, k => rungBox(ladder, k, box, (n, every) => new Int32Array(SIZE * SIZE).fill(Math.ceil(n / every))))
  const scatter = starScatter(mean, box, changes, 16, 16, 0, light)
  const best = meanOfBest(order, peak, count)
  const width = halfWidth(mean, SIZE, SIZE, 16, 16, 0, 0)
  // An octave up, as the figures take it.
  const wider = Float32Array.from(ladder.sums[ladder.counts.length - 1]!, v => v / FRAMES)
  const slope = Math.log(halfWidth(wider, SIZE, SIZE, 16, 16, 0, 0).fwhm! / width.fwhm!) / Math.log(meanOfBest(order, peak, FRAMES).mean / best.mean)
  return { fwhm: width.fwhm!, fwhmErr: Math.hypot(scatter.fwhm!, width.fwhm! * slope * best.error!), share: width.peak / light(mean), shareErr: Math.hypot(scatter.lnShare!, best.error!) * width.peak / light(mean) }
}

describe('stated errors of a stack of stars', () => {
  it('hold the mean of many captures in about 68 % of them', () => {
    const found = Array.from({ length: 60 }, (_, k) => stacked(capture(500 + k), 30))
    const mean = (of: (one: typeof found[number]) => number) => found.reduce((sum, one) => sum + of(one), 0) / found.length
    const within = (value: 'fwhm' | 'share', error: 'fwhmErr' | 'shareErr') => found.filter(one => Math.abs(one[value] - mean(each => each[value])) < one[error]).length / found.length
    // 68 % of 60, three standard deviations of the binomial distribution.
    expect(within('fwhm', 'fwhmErr')).toBeGreaterThan(0.5)
    expect(within('fwhm', 'fwhmErr')).toBeLessThan(0.86)
    expect(within('share', 'shareErr')).toBeGreaterThan(0.5)
    expect(within('share', 'shareErr')).toBeLessThan(0.86)
  })

  it('are withheld where too few frames tell them', () => {
    const order = Int32Array.of(3, 1, 0, 2)
    expect(meanOfBest(order, [1, 2, 3, 4], 3).error).toBeNull()
  })
})

describe('error of the noise', () => {
  it('holds the true noise in about 68 % of many cases', () => {
    let hits = 0
    for (let k = 0; k < 120; k++) {
      const random = gaussianNoise(40 + k)
      const half = () => Float32Array.from({ length: 64 * 64 }, () => 5 * random())
      const a = half()
      const b = half()
      if (Math.abs(halvesNoise(a, b) - 5 / Math.SQRT2) < noiseError(a, b, 64, 64)!) hits++
    }
    expect(hits / 120).toBeGreaterThan(0.55)
    expect(hits / 120).toBeLessThan(0.81)
  })
})
