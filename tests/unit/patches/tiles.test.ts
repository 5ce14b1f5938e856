import { describe, expect, it } from 'vitest'
import { axisWeights, makeMesh, tileCount, tileMiddle } from '../../../workers/patches/mesh'
import { createTileAdder, tileCoverage } from '../../../workers/patches/tiles'
import { accumulateShifted, scratchFor } from '../../../workers/stack/accumulate'
import { fixedScale } from '../../../workers/stack/fixed'
import { meanOf } from '../../../workers/stack/mean'

const width = 70
const height = 52
const mesh = makeMesh(width, height, 20)
const frame = (seed: number) => Float32Array.from({ length: width * height }, (_, i) => 500 + 300 * Math.sin(0.4 * (i % width) + seed) * Math.cos(0.3 * Math.floor(i / width) - seed))

describe('tiles', () => {
  it('share every pixel out completely', () => {
    for (const [length, tiles] of [[70, 4], [52, 3], [61, 1], [128, 8]] as const) {
      const sums = new Float64Array(length)
      for (const { from, weights } of axisWeights(length, tiles)) weights.forEach((w, i) => { sums[from + i]! += w })
      for (const sum of sums) expect(sum).toBeCloseTo(1, 6)
    }
  })

  it('lie around their middles', () => {
    expect([mesh.columns, mesh.rows]).toEqual([4, 3])
    expect(tileMiddle(mesh, 0)).toEqual({ x: 8.25, y: 52 / 6 - 0.5 })
    expect(tileMiddle(mesh, tileCount(mesh) - 1).x).toBeCloseTo(width - 1 - 8.25, 10)
  })

  it('give the plain stack where all have one shift, without seams', () => {
    const scale = fixedScale(1000)
    const shifts = [[0.3, -1.7], [-2.4, 0.45], [1.25, 2.1]] as const
    for (const kernel of ['cubic6', 'cubic', 'bilinear', 'nearest'] as const) {
      const adder = createTileAdder(mesh)
      const tiled = new Int32Array(width * height)
      const plain = new Int32Array(width * height)
      shifts.forEach(([dx, dy], k) => {
        for (let tile = 0; tile < tileCount(mesh); tile++) adder.add(frame(k), tile, dx, dy, kernel, scale, 1, tiled)
        accumulateShifted(frame(k), width, height, dx, dy, kernel, scale, 1, plain, scratchFor(width))
      })
      const covered = tileCoverage(mesh, kernel, (_tile, mark) => shifts.forEach(([dx, dy]) => mark(dx, dy)))
      const whole = covered.map(value => Math.round(value))
      const a = meanOf(Float64Array.from(tiled), covered, scale, 1)
      const b = meanOf(Float64Array.from(plain), whole, scale, 1)
      a.forEach((value, i) => expect(Math.abs(value - b[i]!)).toBeLessThan(0.01))
      covered.forEach((value, i) => expect(value).toBeCloseTo(whole[i]!, 5))
    }
  })

  it('take away what they added, to the last bit, in any order', () => {
    const adder = createTileAdder(mesh)
    const sum = new Int32Array(width * height)
    const parts = Array.from({ length: tileCount(mesh) }, (_, tile) => [tile, 0.31 * tile - 1, 0.7 - 0.2 * tile] as const)
    for (const [tile, dx, dy] of parts) adder.add(frame(1), tile, dx, dy, 'cubic', 64, 1, sum)
    const other = new Int32Array(width * height)
    for (const [tile, dx, dy] of [...parts].reverse()) adder.add(frame(1), tile, dx, dy, 'cubic', 64, 1, other)
    expect(other).toEqual(sum)
    for (const [tile, dx, dy] of parts) adder.add(frame(1), tile, dx, dy, 'cubic', 64, -1, sum)
    expect(sum.every(value => value === 0)).toBe(true)
  })
})
