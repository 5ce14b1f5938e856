/** PNG files (W3C PNG, third edition): 8 and 16 bit, grey and colour. */
import { crc32 } from '../../shared/crc32'
import { deflate } from './deflate'

function chunk(type: string, data: Uint8Array): Uint8Array {
  const bytes = new Uint8Array(12 + data.byteLength)
  const view = new DataView(bytes.buffer)
  view.setUint32(0, data.byteLength)
  for (let i = 0; i < 4; i++) bytes[4 + i] = type.charCodeAt(i)
  bytes.set(data, 8)
  view.setUint32(8 + data.byteLength, crc32(bytes.subarray(4, 8 + data.byteLength)))
  return bytes
}

const latin1 = (text: string) => Uint8Array.from(text, char => (char.charCodeAt(0) < 256 ? char.charCodeAt(0) : 63))

export interface PngInput {
  width: number
  height: number
  channels: 1 | 3
  bitDepth: 8 | 16
  /** Interleaved samples, row 0 at the top. */
  data: Uint8Array | Uint16Array
  /** tEXt entries, keyword to text (Latin-1). */
  text?: Record<string, string>
}

/** The bytes of a PNG file. Rows are filtered by difference to the row above (filter 2), which suits smooth images. */
export async function encodePng({ width, height, channels, bitDepth, data, text = {} }: PngInput): Promise<Uint8Array<ArrayBuffer>> {
  if (data.length !== width * height * channels) throw new RangeError('The samples do not fill the image.')
  const rowBytes = width * channels * bitDepth / 8
  const raw = new Uint8Array(height * (rowBytes + 1))
  const row = new Uint8Array(rowBytes)
  const above = new Uint8Array(rowBytes)
  for (let y = 0; y < height; y++) {
    for (let i = 0; i < width * channels; i++) {
      const value = data[y * width * channels + i]!
      if (bitDepth === 8) row[i] = value
      else {
        row[2 * i] = value >> 8
        row[2 * i + 1] = value & 255
      }
    }
    const at = y * (rowBytes + 1)
    raw[at] = 2
    for (let i = 0; i < rowBytes; i++) raw[at + 1 + i] = row[i]! - above[i]!
    above.set(row)
  }
  const header = new Uint8Array(13)
  const view = new DataView(header.buffer)
  view.setUint32(0, width)
  view.setUint32(4, height)
  header.set([bitDepth, channels === 3 ? 2 : 0, 0, 0, 0], 8)
  const parts = [
    Uint8Array.of(0x89, 0x50, 0x4e, 0x47, 0x0d, 0x0a, 0x1a, 0x0a),
    chunk('IHDR', header),
    ...Object.entries(text).map(([keyword, value]) => chunk('tEXt', latin1(`${keyword.slice(0, 79)}\0${value}`))),
    chunk('IDAT', await deflate(raw)),
    chunk('IEND', new Uint8Array(0)),
  ]
  const file = new Uint8Array(parts.reduce((sum, part) => sum + part.byteLength, 0))
  let at = 0
  for (const part of parts) {
    file.set(part, at)
    at += part.byteLength
  }
  return file
}
