import { execFileSync } from 'node:child_process'
import { describe, expect, it } from 'vitest'
import { hasSimd, makeKernels, type Kernels } from '../../workers/kernels/index'
import { resampleKernels } from '../../shared/schemas/recipe'
import { uniformFrom } from './support/moving-double'

describe('vector kernels', () => {
  it('are there in this engine', () => {
    expect(hasSimd()).toBe(true)
  })

  it.each(resampleKernels)('give the same integers as their plain twin (%s)', (kernel) => {
    const uniform = uniformFrom(99)
    for (const [width, height] of [[64, 48], [61, 33], [5, 7], [3, 2], [1, 1]] as const) {
      const plain = makeKernels(2 ** 20, width, 0, 'plain')
      const simd = makeKernels(2 ** 20, width, 0, 'simd')
      const data = Float32Array.from({ length: width * height }, () => (uniform() - 0.1) * 60_000)
      data[0] = Number.POSITIVE_INFINITY
      data[data.length - 1] = Number.NaN
      const sums = [plain, simd].map((kernels) => {
        const source = kernels.floats(width * height)
        source.set(data)
        return { kernels, source, sum: kernels.ints(width * height) }
      })
      for (let k = 0; k < 60; k++) {
        const dx = k === 0 ? 0 : (uniform() - 0.5) * width * 2.5
        const dy = k === 1 ? 0 : k === 2 ? 3 : (uniform() - 0.5) * height * 2.5
        for (const { kernels, source, sum } of sums) kernels.addShifted(source, width, height, dx, dy, kernel, 32, k % 5 === 4 ? -1 : 1, sum)
        expect(sums[1]!.sum).toEqual(sums[0]!.sum)
      }
    }
  })

  it('convert and add stored samples like their plain twins', () => {
    const uniform = uniformFrom(3)
    for (const n of [1, 7, 16, 40, 1000]) {
      for (const samples of [Uint8Array.from({ length: n + 5 }, () => uniform() * 256), Uint16Array.from({ length: n + 5 }, () => uniform() * 65_536), Float32Array.from({ length: n + 5 }, () => uniform() - 0.5)]) {
        const [plain, simd] = (['plain', 'simd'] as const).map(path => makeKernels(2 ** 16, 1, n, path)) as [Kernels, Kernels]
        for (const limit of [200, 40_000.5, 65_535, Infinity]) {
          const out = [plain, simd].map(kernels => kernels.floats(n))
          expect(simd.convert(samples, 5, n, limit, out[1]!)).toBe(plain.convert(samples, 5, n, limit, out[0]!))
          expect(out[1]).toEqual(out[0])
        }
        if (samples instanceof Float32Array) continue
        const sums = [plain, simd].map(kernels => ({ kernels, sum: kernels.ints(n) }))
        for (const { kernels, sum } of sums) for (const offset of [0, 3, 5]) kernels.addSamples(samples, offset, n, sum)
        expect(sums[1]!.sum).toEqual(sums[0]!.sum)
      }
    }
  })

  it('are compiled from the sources beside them', () => {
    expect(() => execFileSync(process.execPath, ['scripts/build-kernels.mjs', '--check'], { stdio: 'pipe' })).not.toThrow()
  }, 30_000)
})
