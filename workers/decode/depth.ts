/** Byte order and alignment of 16-bit samples, decided by content. */
import type { ByteOrder, CaptureNote } from '../../shared/schemas/capture'
import { info, trouble } from './facts'

export interface DepthDecision {
  order: ByteOrder
  decidedBy: 'format' | 'content' | 'header' | 'user'
  /** Bits by which samples are shifted right, where they are aligned to the top of the word. */
  shift: number
  depth: number
  saturation: number
  note?: CaptureNote
}

interface Reading { roughness: number, max: number, low: number, count: number }

/** Reads bytes in one order: mean absolute difference of neighbours of one colour, maximum, OR of all values. */
function read(parts: Uint8Array[], rowSamples: number, step: number, little: boolean): Reading {
  const reading = { roughness: 0, max: 0, low: 0, count: 0 }
  for (const bytes of parts) {
    const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength)
    const n = bytes.byteLength >> 1
    for (let i = 0; i < n; i++) {
      const value = view.getUint16(2 * i, little)
      if (value > reading.max) reading.max = value
      reading.low |= value
      // Two steps: neighbours of one colour in a mosaic are two apart.
      if (i % rowSamples >= 2 * step) {
        reading.roughness += Math.abs(value - view.getUint16(2 * (i - 2 * step), little))
        reading.count++
      }
    }
  }
  return reading
}

const trailingZeros = (bits: number) => (bits === 0 ? 0 : 31 - Math.clz32(bits & -bits))

/**
 * Which order makes sense of these samples: the one that stays within the declared depth, otherwise the smoother
 * one. The header's flag is not asked, because writers disagree about its meaning; where the content cannot
 * decide (blank frames), little-endian is taken, as common practice has it, and said.
 *
 * `rowSamples` samples make a row; `step` samples make a pixel.
 */
export function decideDepth(parts: Uint8Array[], depth: number, rowSamples: number, step: number, wanted?: ByteOrder): DepthDecision {
  const little = read(parts, rowSamples, step, true)
  const big = read(parts, rowSamples, step, false)
  let order: ByteOrder = 'little'
  let decidedBy: DepthDecision['decidedBy'] = 'content'
  let note: CaptureNote | undefined
  const limit = 2 ** depth - 1
  if (wanted) {
    order = wanted
    decidedBy = 'user'
  }
  else if (depth < 16 && (little.max <= limit) !== (big.max <= limit)) order = little.max <= limit ? 'little' : 'big'
  else if (little.roughness < 0.9 * big.roughness) order = 'little'
  else if (big.roughness < 0.9 * little.roughness) order = 'big'
  else {
    decidedBy = 'header'
    note = info('byte-order', 'The frames are too even to tell their byte order; they are read as little-endian, as most files are. Correct it if the picture looks torn.')
  }
  const chosen = order === 'little' ? little : big
  let shift = 0
  if (depth < 16 && chosen.max > limit) {
    if (trailingZeros(chosen.low) >= 16 - depth) {
      shift = 16 - depth
      note = info('aligned', `The ${depth}-bit samples fill the upper bits of their words; they are shifted down by ${shift} bits.`)
    }
    else {
      note = trouble('depth', `The header says ${depth} bits a sample, but samples reach ${chosen.max.toLocaleString('en')}; they are read as 16 bits.`)
      return { order, decidedBy, shift: 0, depth: 16, saturation: 65_535, note }
    }
  }
  // Samples of fewer bits at the top of a 16-bit word clip below 65,535.
  const unused = depth === 16 ? trailingZeros(chosen.low) : 0
  const saturation = unused > 0 && unused < 8 ? 65_536 - 2 ** unused : limit
  return { order, decidedBy, shift, depth, saturation, note }
}
