import { describe, expect, it } from 'vitest'
import { makeKernels } from '../../workers/kernels/index'
import { AverageSum, averageOf } from '../../workers/run/average'
import { pack, unpack } from '../../workers/run/pack'
import { ProgressMeter } from '../../workers/run/progress'
import { countSetAside, rankFrames, reasonCode } from '../../workers/run/rank'
import { lullVersion } from '../../workers/run/version'
import { version } from '../../package.json'
import type { PassProgress } from '../../workers/api'

describe('ranking', () => {
  it('puts larger scores first, breaks ties by frame number and leaves out what is set aside', () => {
    const score = Float64Array.of(2, 5, Number.NaN, 5, 9, 1)
    const setAside = Uint8Array.of(0, 0, 0, 0, reasonCode('saturated'), 0)
    const { order, rank } = rankFrames({ score, setAside })
    expect([...order]).toEqual([1, 3, 0, 5, 2])
    expect([...rank]).toEqual([3, 1, 5, 2, 0, 4])
    expect(countSetAside(setAside)).toEqual({ saturated: 1 })
  })
})

describe('the plain average', () => {
  it('is the exact mean of integers, beyond what 32 bits hold', () => {
    const frame = Uint16Array.of(65535, 1, 40000, 0)
    const sum = new AverageSum(4, frame, 1, makeKernels(1024, 4, 4))
    for (let k = 0; k < 70_000; k++) sum.add(frame, 0, 1)
    expect([...averageOf(sum.take(), 70_000, 1)]).toEqual([65535, 1, 40000, 0])
  })
  it('does not depend on the order of float frames', () => {
    const frames = Float32Array.from({ length: 300 }, (_, i) => Math.sin(i * 12.9898) * 43758.5453)
    const forward = new AverageSum(3, frames, 1024, makeKernels(1024, 3, 3))
    const backward = new AverageSum(3, frames, 1024, makeKernels(1024, 3, 3))
    for (let k = 0; k < 100; k++) forward.add(frames, k * 3, 1)
    for (let k = 99; k >= 0; k--) backward.add(frames, k * 3, 1)
    const a = forward.take()
    expect(backward.take()).toEqual(a)
    const mean = frames.filter((_, i) => i % 3 === 0).reduce((s, v) => s + v, 0) / 100
    expect(averageOf(a, 100, 1024)[0]).toBeCloseTo(mean, 2)
  })
})

describe('packed stage results', () => {
  it('come back as they went, not-a-number and nested columns included', () => {
    const value = { kind: 'star', list: [1, Number.NaN, null], columns: { x: Float64Array.of(1, Number.NaN), flags: Uint8Array.of(1, 2, 3) }, sums: [Float64Array.of(2 ** 50)] }
    expect(unpack(pack(value))).toEqual(value)
  })
  it('are refused when cut short or foreign', () => {
    const bytes = pack({ a: Float64Array.of(1, 2, 3) })
    for (let cut = 0; cut < bytes.length; cut++) expect(unpack(bytes.subarray(0, cut))).toBeNull()
    expect(unpack(new Uint8Array(64))).toBeNull()
  })
})

describe('progress', () => {
  it('reports at most ten times a second with a smoothed rate and the time left', () => {
    let now = 0
    const reports: PassProgress[] = []
    const meter = new ProgressMeter(report => reports.push(report), () => now)
    meter.begin('grade', 0, 10_000)
    for (let k = 0; k < 5000; k++) {
      now += 1
      meter.add(1)
    }
    expect(reports.length).toBeLessThanOrEqual(51)
    expect(reports.at(-1)!.framesPerSecond).toBeCloseTo(1000, 3)
    expect(reports.at(-1)!.secondsLeft).toBeCloseTo(5, 1)
    meter.end()
    expect(reports.at(-1)).toMatchObject({ done: 10_000, total: 10_000, secondsLeft: 0 })
  })
})

it('states the version of the package', () => {
  expect(lullVersion).toBe(version)
})
