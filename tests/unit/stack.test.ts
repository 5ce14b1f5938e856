import { describe, expect, it } from 'vitest'
import { accumulateShifted, coveredBy, FIXED_LIMIT, scratchFor } from '../../workers/stack/accumulate'
import { coverageCounts, coverageMarks, markCovered } from '../../workers/stack/coverage'
import { addSum, fixedScale, fixedSum, makeRoom } from '../../workers/stack/fixed'
import { fillUncovered, meanOf } from '../../workers/stack/mean'
import { rungCounts, rungOfRank, shareRungs } from '../../workers/stack/rungs'
import { tapsAt } from '../../workers/stack/weights'
import { keepCount, proofFractions } from '../../shared/schemas/run'

const width = 40
const height = 30

/** A smooth scene sampled at shifted places: no resampling involved. */
function scene(dx: number, dy: number): Float32Array {
  return Float32Array.from({ length: width * height }, (_, i) => {
    const x = i % width - dx, y = Math.floor(i / width) - dy
    return 300 + 2000 * Math.exp(-((x - 17.3) ** 2 + (y - 13.6) ** 2) / 18) + 900 * Math.exp(-((x - 25.1) ** 2 + (y - 11.2) ** 2) / 18)
  })
}

function stackOf(frames: { image: Float32Array, dx: number, dy: number }[], kernel: 'cubic' | 'bilinear' | 'nearest', scale = 512) {
  const sum = fixedSum(new Int32Array(width * height))
  const marks = coverageMarks(width, height)
  const scratch = scratchFor(width)
  for (const { image, dx, dy } of frames) {
    makeRoom(sum)
    accumulateShifted(image, width, height, dx, dy, kernel, scale, 1, sum.small, scratch)
    markCovered(marks, width, coveredBy(kernel, width, height, dx, dy), 1)
  }
  const whole = new Float64Array(width * height)
  addSum(whole, sum)
  const counts = coverageCounts(marks, width, height)
  return { mean: meanOf(whole, counts, scale, 1), counts, whole }
}

describe('resampling weights', () => {
  it('sum to one and reproduce a quadratic, as Keys 1981 shows for a = -1/2', () => {
    for (const t of [0.1, 0.25, 0.5, 0.9]) {
      const { first, weights } = tapsAt('cubic', t)
      expect(weights.reduce((sum, w) => sum + w, 0)).toBeCloseTo(1, 6)
      const f = (x: number) => 3 + 2 * x - 0.7 * x * x
      expect(weights.reduce((sum, w, k) => sum + w * f(first + k), 0)).toBeCloseTo(f(t), 5)
    }
    // Keys 1981, the kernel at half a sample: -1/16, 9/16, 9/16, -1/16.
    expect([...tapsAt('cubic', 0.5).weights]).toEqual([-0.0625, 0.5625, 0.5625, -0.0625])
  })
})

describe('adding shifted frames', () => {
  it('puts a frame shifted by whole pixels exactly where the shift says', () => {
    const image = new Float32Array(width * height)
    image[10 * width + 12] = 100
    const { mean, counts } = stackOf([{ image, dx: 3, dy: -2 }], 'cubic')
    expect(mean[8 * width + 15]).toBe(100)
    expect(mean.reduce((sum, value) => sum + value, 0)).toBe(100)
    expect(counts[8 * width + 2]).toBe(0)
    expect(counts[27 * width + 3]).toBe(1)
    expect(counts[28 * width + 3]).toBe(0)
  })

  it.each([['cubic', 2.5], ['bilinear', 30], ['nearest', 190]] as const)('moves a known scene onto itself (%s)', (kernel, tolerance) => {
    const shifts = [[0, 0], [1.37, -2.61], [-0.5, 0.5], [3.02, 1.98], [-2.25, -1.75]] as const
    const { mean, counts } = stackOf(shifts.map(([dx, dy]) => ({ image: scene(-dx, -dy), dx, dy })), kernel)
    const truth = scene(0, 0)
    let worst = 0
    mean.forEach((value, i) => { if (counts[i] === shifts.length) worst = Math.max(worst, Math.abs(value - truth[i]!)) })
    expect(worst).toBeLessThan(tolerance)
  })

  it('leaves no dark or bright edge: each pixel is divided by the frames that cover it', () => {
    const flat = new Float32Array(width * height).fill(1000)
    const { mean, counts } = stackOf([{ image: flat, dx: 6.4, dy: 0 }, { image: flat, dx: -3.7, dy: 2.2 }, { image: flat, dx: 0, dy: 0 }], 'cubic')
    expect(Math.min(...counts)).toBe(1)
    for (const value of mean) expect(Math.abs(value - 1000)).toBeLessThan(0.01)
  })

  it('fills what no frame covers with the nearest covered pixel', () => {
    const image = Float32Array.from({ length: width * height }, (_, i) => i % width)
    const { mean, counts } = stackOf([{ image, dx: 4, dy: 3 }], 'nearest')
    fillUncovered(mean, counts, width, height, 1)
    expect(mean[0]).toBe(0)
    expect(mean[3 * width + 4]).toBe(0)
    expect(mean[3 * width + 9]).toBe(5)
    expect(mean[9]).toBe(5)
  })

  it('gives the same integers in any order, and subtracting takes away exactly what adding put', () => {
    const frames = Array.from({ length: 9 }, (_, k) => ({ image: scene(k * 0.37, -k * 0.21), dx: -k * 0.37, dy: k * 0.21 }))
    const forward = stackOf(frames, 'cubic').whole
    expect(stackOf(frames.slice().reverse(), 'cubic').whole).toEqual(forward)
    const sum = new Int32Array(width * height)
    const scratch = scratchFor(width)
    for (const { image, dx, dy } of frames) accumulateShifted(image, width, height, dx, dy, 'cubic', 512, 1, sum, scratch)
    for (const { image, dx, dy } of frames.slice(4)) accumulateShifted(image, width, height, dx, dy, 'cubic', 512, -1, sum, scratch)
    expect(Float64Array.from(sum)).toEqual(stackOf(frames.slice(0, 4), 'cubic').whole)
  })

  it('holds more frames than 32 bits could', () => {
    const bright = new Float32Array(width * height).fill(65535)
    const sum = fixedSum(new Int32Array(width * height))
    const scratch = scratchFor(width)
    const scale = fixedScale(65535)
    for (let k = 0; k < 1300; k++) {
      makeRoom(sum)
      accumulateShifted(bright, width, height, 0, 0, 'nearest', scale, 1, sum.small, scratch)
    }
    const whole = new Float64Array(width * height)
    addSum(whole, sum)
    expect(whole[7]).toBe(1300 * 65535 * scale)
  })

  it('clips what is out of range and counts not-a-number as nothing', () => {
    const image = new Float32Array(width * height)
    image[0] = Infinity
    image[1] = Number.NaN
    const sum = new Int32Array(width * height)
    accumulateShifted(image, width, height, 0, 0, 'nearest', 1, 1, sum, scratchFor(width))
    expect([...sum.subarray(0, 3)]).toEqual([FIXED_LIMIT, 0, 0])
  })
})

describe('rungs', () => {
  it.each([1, 2, 7, 60, 150, 1000, 5000, 50_000, 1_000_000])('hold the counts of the proofs and end at %i', (ranked) => {
    const counts = rungCounts(ranked)
    expect(counts.length).toBeLessThanOrEqual(48)
    expect(counts.at(-1)).toBe(ranked)
    expect(counts.every((count, k) => k === 0 || count > counts[k - 1]!)).toBe(true)
    for (const fraction of proofFractions) expect(counts).toContain(keepCount(fraction, ranked))
  })
  it('are never further apart than a twentieth of the frames', () => {
    const counts = rungCounts(5000)
    counts.forEach((count, k) => { if (k > 0) expect(count - counts[k - 1]!).toBeLessThanOrEqual(250) })
  })
  it('know the rung of each rank and share the frames evenly', () => {
    const counts = rungCounts(1000)
    for (let rank = 0; rank < 1000; rank++) {
      const rung = rungOfRank(counts, rank)
      expect(rank).toBeLessThan(counts[rung]!)
      expect(rank).toBeGreaterThanOrEqual(rung > 0 ? counts[rung - 1]! : 0)
    }
    const owner = shareRungs(counts, 3)
    const load = [0, 0, 0]
    counts.forEach((count, k) => { load[owner[k]!]! += count - (counts[k - 1] ?? 0) })
    expect(Math.max(...load) - Math.min(...load)).toBeLessThan(20)
  })
})
