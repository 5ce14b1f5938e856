/** FITS data → samples: any BITPIX, BZERO, BSCALE, BLANK; big-endian as the standard has it. */
import type { SampleKind } from '../../../shared/schemas/capture'
import { machineIsLittleEndian, swap16 } from '../bytes'
import type { Samples } from '../types'

export interface SampleFormat {
  bitpix: number
  bzero: number
  bscale: number
  /** Integer that stands for "no value"; null where there is none. */
  blank: number | null
}

/** Unsigned 8 and 16 bits stay integers; all else becomes float32. */
export function sampleKindOf({ bitpix, bzero, bscale, blank }: SampleFormat): SampleKind {
  if (bitpix === 8 && bzero === 0 && bscale === 1 && blank === null) return 'uint8'
  if (bitpix === 16 && bzero === 32768 && bscale === 1 && blank === null) return 'uint16'
  return 'float32'
}

/** Samples of consecutive data. What has no value (BLANK, NaN, infinities) becomes 0; returns how many those were. */
export function decodeSamples(bytes: Uint8Array<ArrayBuffer>, format: SampleFormat): { samples: Samples, missing: number } {
  const { bitpix, bzero, bscale, blank } = format
  const kind = sampleKindOf(format)
  const n = bytes.byteLength / (Math.abs(bitpix) / 8)
  if (kind === 'uint8') return { samples: bytes, missing: 0 }
  if (kind === 'uint16') {
    const words = new Uint16Array(bytes.buffer, bytes.byteOffset, n)
    if (machineIsLittleEndian) swap16(words)
    // Stored value + 32768 modulo 2^16 is the stored word with its highest bit turned.
    for (let i = 0; i < n; i++) words[i] = words[i]! ^ 0x8000
    return { samples: words, missing: 0 }
  }
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength)
  const out = new Float32Array(n)
  let missing = 0
  for (let i = 0; i < n; i++) {
    let raw: number
    switch (bitpix) {
      case 8: raw = bytes[i]!; break
      case 16: raw = view.getInt16(2 * i, false); break
      case 32: raw = view.getInt32(4 * i, false); break
      case 64: raw = Number(view.getBigInt64(8 * i, false)); break
      case -32: raw = view.getFloat32(4 * i, false); break
      default: raw = view.getFloat64(8 * i, false)
    }
    const value = raw === blank && bitpix > 0 ? Number.NaN : bzero + bscale * raw
    if (Number.isFinite(value)) out[i] = value
    else missing++
  }
  return { samples: out, missing }
}

/** Turns each plane of `height` rows upside down in place: FITS rows go up, rows in memory go down. */
export function flipRows(samples: Samples, width: number, height: number): void {
  const row = samples.slice(0, width)
  const plane = width * height
  for (let start = 0; start + plane <= samples.length; start += plane) {
    for (let top = 0, bottom = height - 1; top < bottom; top++, bottom--) {
      const a = start + top * width
      const b = start + bottom * width
      row.set(samples.subarray(a, a + width) as never)
      samples.copyWithin(a, b, b + width)
      samples.set(row as never, b)
    }
  }
}
