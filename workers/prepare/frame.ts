/**
 * From stored samples to the planes that are judged and stacked. Nothing is allocated per frame: working
 * memory is kept between calls and grows only with the frame size.
 */
import type { Samples } from '../decode/types'
import { demosaic } from './demosaic'
import type { PreparePlan } from './types'

/** Planes that go into the stack: 3 for colour and mosaics, 1 for mono. */
export function outPlanes(plan: Pick<PreparePlan, 'planes' | 'mosaic'>): 1 | 3 {
  return plan.planes === 3 || plan.mosaic !== 'none' ? 3 : 1
}

let scratch = new Float32Array(0)
function working(length: number): Float32Array {
  if (scratch.length < length) scratch = new Float32Array(length)
  return scratch
}

/** Copies stored samples to floats and says how many are at or over a limit; workers/kernels has a vector form. */
export type Convert = (samples: Samples, offset: number, length: number, limit: number, out: Float32Array) => number

export const plainConvert: Convert = (samples, offset, length, limit, out) => {
  let clipped = 0
  for (let i = 0; i < length; i++) {
    const value = samples[offset + i]!
    out[i] = value
    if (value >= limit) clipped++
  }
  return clipped
}

/** Copies one frame, repairs hot and dead pixels and counts the clipped samples (hot ones left out). */
function load(samples: Samples, offset: number, length: number, plan: PreparePlan, out: Float32Array, convert: Convert): number {
  const limit = plan.saturation ?? Infinity
  let clipped = convert(samples, offset, length, limit, out)
  const { hotPixels } = plan
  for (let h = 0; h < hotPixels.length; h++) {
    const i = hotPixels[h]!
    if (samples[offset + i]! >= limit) clipped--
    out[i] = repaired(samples, offset, plan, h)
  }
  return clipped
}

/** What stands in for faulty pixel number h: the mean of its four sound neighbours. */
function repaired(samples: Samples, offset: number, { repairFrom }: PreparePlan, h: number): number {
  const k = 4 * h
  return 0.25 * (samples[offset + repairFrom[k]!]! + samples[offset + repairFrom[k + 1]!]!
    + samples[offset + repairFrom[k + 2]!]! + samples[offset + repairFrom[k + 3]!]!)
}

/**
 * Luminance for judging, width × height, in sample units.
 *
 * Mono: the samples. Colour: (R + 2G + B)/4. Mosaic: the raw mosaic filtered with the binomial kernel
 * [1 2 1] ⊗ [1 2 1] / 16, which is zero at the three frequencies that carry the colour difference of a 2 × 2
 * mosaic and leaves the same (R + 2G + B)/4, with less noise than any interpolated plane.
 * (The frequency view of a mosaic: Alleysson, Süsstrunk & Hérault 2005, IEEE TIP 14, 439, from memory.)
 *
 * @param offset index of the frame's first sample
 * @returns how many samples of the frame are clipped
 */
export function prepareLuminance(samples: Samples, offset: number, plan: PreparePlan, out: Float32Array, convert: Convert = plainConvert): number {
  const { width, height } = plan
  const size = width * height
  if (plan.planes === 3) {
    const planes = working(3 * size)
    const clipped = load(samples, offset, 3 * size, plan, planes, convert)
    for (let i = 0; i < size; i++) out[i] = 0.25 * (planes[i]! + 2 * planes[size + i]! + planes[2 * size + i]!)
    return clipped
  }
  if (plan.mosaic === 'none') return load(samples, offset, size, plan, out, convert)
  const raw = working(size)
  const clipped = load(samples, offset, size, plan, raw, convert)
  binomial(raw, width, height, out)
  return clipped
}

/**
 * The rows [from, to) of the luminance alone, where a frame's other rows are not looked at: the same values as prepareLuminance
 * gives there. Colour and mosaics are made whole.
 */
export function prepareRows(samples: Samples, offset: number, plan: PreparePlan, from: number, to: number, out: Float32Array, convert: Convert = plainConvert): void {
  if (plan.planes === 3 || plan.mosaic !== 'none') {
    prepareLuminance(samples, offset, plan, out, convert)
    return
  }
  const first = Math.max(0, from) * plan.width
  const last = Math.min(plan.height, to) * plan.width
  if (last <= first) return
  convert(samples, offset + first, last - first, Infinity, first === 0 && last === out.length ? out : out.subarray(first, last))
  const { hotPixels } = plan
  for (let h = 0; h < hotPixels.length; h++) if (hotPixels[h]! >= first && hotPixels[h]! < last) out[hotPixels[h]!] = repaired(samples, offset, plan, h)
}

/** Planes for stacking, outPlanes(plan) × height × width, in sample units; mosaics by Malvar-He-Cutler. */
export function prepareColour(samples: Samples, offset: number, plan: PreparePlan, out: Float32Array, convert: Convert = plainConvert): void {
  const size = plan.width * plan.height
  if (plan.planes === 3) {
    load(samples, offset, 3 * size, plan, out, convert)
    return
  }
  if (plan.mosaic === 'none') {
    load(samples, offset, size, plan, out, convert)
    return
  }
  const raw = working(size)
  load(samples, offset, size, plan, raw, convert)
  demosaic(raw, plan.width, plan.height, plan.mosaic, out)
}

/** [1 2 1] ⊗ [1 2 1] / 16, mirrored at the edge so that the mosaic's order of colours goes on. */
export function binomial(input: Float32Array, width: number, height: number, out: Float32Array): void {
  for (let y = 0; y < height; y++) {
    const here = y * width
    const up = (y > 0 ? y - 1 : Math.min(1, height - 1)) * width
    const down = (y < height - 1 ? y + 1 : Math.max(0, height - 2)) * width
    let left = input[up + Math.min(1, width - 1)]! + 2 * input[here + Math.min(1, width - 1)]! + input[down + Math.min(1, width - 1)]!
    let middle = input[up]! + 2 * input[here]! + input[down]!
    for (let x = 0; x < width - 1; x++) {
      const right = input[up + x + 1]! + 2 * input[here + x + 1]! + input[down + x + 1]!
      out[here + x] = (left + 2 * middle + right) * 0.0625
      left = middle
      middle = right
    }
    const mirrored = width > 1 ? left : middle
    out[here + width - 1] = (left + 2 * middle + mirrored) * 0.0625
  }
}
