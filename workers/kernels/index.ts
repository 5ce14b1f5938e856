/**
 * Inner loops, each in two forms with equal results: plain TypeScript, which always works, and WebAssembly
 * with 128-bit vectors. Buffers come from the kernels, so that the vector form finds them in its memory.
 */
import type { Samples } from '../decode/types'
import { plainConvert, type Convert } from '../prepare/frame'
import type { ResampleKernel } from '../../shared/schemas/recipe'
import { accumulateShifted, scratchFor } from '../stack/accumulate'
import { axisShift } from '../stack/weights'
import { kernelBinary } from './binary'

export interface Kernels {
  readonly path: 'plain' | 'simd'
  floats(length: number): Float32Array
  ints(length: number): Int32Array
  /** As accumulateShifted in stack/accumulate.ts. Both buffers must come from these kernels. */
  addShifted(source: Float32Array, width: number, height: number, dx: number, dy: number, kernel: ResampleKernel, scale: number, sign: 1 | -1, sum: Int32Array): void
  /** As plainConvert in prepare/frame.ts; fast where `out` comes from these kernels. */
  convert: Convert
  /** Adds integer samples to 32-bit sums, read as unsigned; `sum` must come from these kernels. */
  addSamples(samples: Samples, offset: number, length: number, sum: Int32Array): void
}

/** Bytes beyond which a memory of its own is not asked for. */
const MOST_BYTES = 2 ** 31
const PAGE = 65_536
/** Vectors read up to 16 bytes past the end of a row. */
const SLACK = 64

/**
 * Kernels with room for buffers of `bytes` in all; the vector form where the machine has it and allows it.
 * @param rowLength longest row that will be shifted
 * @param stored samples of the longest frame that will be converted or added
 * @param path asks for one form; "simd" is a wish, not a demand
 */
export function makeKernels(bytes: number, rowLength: number, stored: number, path: 'plain' | 'simd' = 'simd'): Kernels {
  return (path === 'simd' ? simdKernels(bytes + stored * 2 + (rowLength + 8) * 4 + 16 * SLACK, rowLength, stored) : null) ?? plainKernels(rowLength)
}

function plainKernels(rowLength: number): Kernels {
  const scratch = scratchFor(rowLength)
  return {
    path: 'plain',
    floats: length => new Float32Array(length),
    ints: length => new Int32Array(length),
    addShifted: (source, width, height, dx, dy, kernel, scale, sign, sum) =>
      accumulateShifted(source, width, height, dx, dy, kernel, scale, sign, sum, scratch),
    convert: plainConvert,
    addSamples,
  }
}

function addSamples(samples: Samples, offset: number, length: number, sum: Int32Array): void {
  for (let i = 0; i < length; i++) sum[i]! += samples[offset + i]!
}

interface Exports {
  addShifted(source: number, width: number, height: number,
    x0: number, x1: number, ox: number, nx: number, wx0: number, wx1: number, wx2: number, wx3: number, wx4: number, wx5: number,
    y0: number, y1: number, oy: number, ny: number, wy0: number, wy1: number, wy2: number, wy3: number, wy4: number, wy5: number,
    scale: number, sign: number, sum: number, row: number): void
  fromU8(source: number, out: number, length: number, limit: number): number
  fromU16(source: number, out: number, length: number, limit: number): number
  sumU8(source: number, sum: number, length: number): void
  sumU16(source: number, sum: number, length: number): void
}

let compiled: WebAssembly.Module | null | undefined

/** The compiled module; null where WebAssembly, its vectors or the page's policy do not allow it. */
function kernelModule(): WebAssembly.Module | null {
  if (compiled !== undefined) return compiled
  try {
    compiled = new WebAssembly.Module(Uint8Array.from(atob(kernelBinary), letter => letter.charCodeAt(0)))
  }
  catch {
    compiled = null
  }
  return compiled
}

export const hasSimd = (): boolean => kernelModule() !== null

function simdKernels(bytes: number, rowLength: number, stored: number): Kernels | null {
  const module = kernelModule()
  if (!module || bytes > MOST_BYTES) return null
  let memory: WebAssembly.Memory
  let exports: Exports
  try {
    memory = new WebAssembly.Memory({ initial: Math.ceil(bytes / PAGE) + 1 })
    exports = new WebAssembly.Instance(module, { env: { memory, abort: () => undefined } }).exports as unknown as Exports
  }
  catch {
    return null
  }
  // The first page belongs to the module's own data.
  let top = 1024
  const reserve = (length: number) => {
    const at = top
    top = Math.ceil((top + length * 4 + SLACK) / 16) * 16
    if (top > memory.buffer.byteLength) throw new RangeError('The kernels were made with too little memory.')
    return at
  }
  const row = reserve(rowLength + 8)
  const staging = reserve(Math.ceil(stored / 2))
  const wide = new Uint16Array(memory.buffer, staging, stored)
  const narrow = new Uint8Array(memory.buffer, staging, stored)
  /** Copies integer samples into the kernels' memory. */
  const stage = (samples: Uint8Array | Uint16Array, offset: number, length: number) =>
    (samples instanceof Uint16Array ? wide : narrow).set(samples.subarray(offset, offset + length))
  return {
    path: 'simd',
    floats: length => new Float32Array(memory.buffer, reserve(length), length),
    ints: length => new Int32Array(memory.buffer, reserve(length), length),
    addShifted(source, width, height, dx, dy, kernel, scale, sign, sum) {
      const x = axisShift(kernel, dx, width)
      const y = axisShift(kernel, dy, height)
      const [wx0 = 0, wx1 = 0, wx2 = 0, wx3 = 0, wx4 = 0, wx5 = 0] = x.weights
      const [wy0 = 0, wy1 = 0, wy2 = 0, wy3 = 0, wy4 = 0, wy5 = 0] = y.weights
      exports.addShifted(source.byteOffset, width, height,
        x.from, x.to, x.offset, x.weights.length, wx0, wx1, wx2, wx3, wx4, wx5,
        y.from, y.to, y.offset, y.weights.length, wy0, wy1, wy2, wy3, wy4, wy5,
        scale, sign, sum.byteOffset, row)
    },
    convert(samples, offset, length, limit, out) {
      if (samples instanceof Float32Array || out.buffer !== memory.buffer) return plainConvert(samples, offset, length, limit, out)
      stage(samples, offset, length)
      return (samples instanceof Uint16Array ? exports.fromU16 : exports.fromU8)(staging, out.byteOffset, length, wholeLimit(limit))
    },
    addSamples(samples, offset, length, sum) {
      if (samples instanceof Float32Array) return addSamples(samples, offset, length, sum)
      stage(samples, offset, length)
      const add = samples instanceof Uint16Array ? exports.sumU16 : exports.sumU8
      add(staging, sum.byteOffset, length)
    },
  }
}

/** The least integer that is at or over a limit; one that no sample reaches where there is none. */
const wholeLimit = (limit: number): number => limit <= 65_535 ? Math.max(0, Math.ceil(limit)) : 65_536
