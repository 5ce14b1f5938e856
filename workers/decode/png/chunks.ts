/** The chunks of a PNG file (W3C PNG, third edition), walked with caps. */
import { crc32 } from '../../../shared/crc32'
import { CaptureError } from '../types'
import { checkFrameSize } from '../limits'

export interface PngInfo {
  width: number
  height: number
  bitDepth: number
  /** 0 grey, 2 colour, 3 palette, 4 grey with alpha, 6 colour with alpha. */
  colourType: number
  interlaced: boolean
  palette: Uint8Array | null
  /** Compressed image data. */
  data: Uint8Array
}

const depths: Record<number, number[]> = { 0: [1, 2, 4, 8, 16], 2: [8, 16], 3: [1, 2, 4, 8], 4: [8, 16], 6: [8, 16] }
export const samplesPerPixel: Record<number, number> = { 0: 1, 2: 3, 3: 1, 4: 2, 6: 4 }

export type PngHead = Omit<PngInfo, 'data' | 'palette'>

/** Bytes of the signature and the header chunk. */
export const PNG_HEAD_BYTES = 33

/** The header chunk, which is always the first (W3C PNG, 5.6). `head` holds at least PNG_HEAD_BYTES. */
export function readPngHead(name: string, head: Uint8Array): PngHead {
  const damaged = (what: string) => new CaptureError('damaged', `${name} is a damaged PNG file: ${what}. Copy it again.`)
  if (head.byteLength < PNG_HEAD_BYTES) throw new CaptureError('truncated', `${name} ends within its header. Copy it again from the card.`)
  const view = new DataView(head.buffer, head.byteOffset, head.byteLength)
  if (view.getUint32(8) !== 13 || view.getUint32(12) !== 0x49484452) throw damaged('it does not begin with its header')
  if (crc32(head.subarray(12, 29)) !== view.getUint32(29)) throw damaged('the checksum of its IHDR chunk is wrong')
  const [bitDepth, colourType, compression, filter, interlace] = [...head.subarray(24, 29)] as [number, number, number, number, number]
  const info = { width: view.getUint32(16), height: view.getUint32(20), bitDepth, colourType, interlaced: interlace === 1 }
  checkFrameSize(name, info.width, info.height, colourType === 2 || colourType === 6 || colourType === 3 ? 3 : 1)
  if (!depths[colourType]?.includes(bitDepth)) throw new CaptureError('unsupported-depth', `${name} says it has ${bitDepth} bits of colour type ${colourType}, which PNG does not know. The file is damaged, or was written wrongly.`)
  if (compression !== 0 || filter !== 0 || interlace > 1) throw new CaptureError('unsupported-compression', `${name} is packed in a way that the PNG standard does not know.`)
  return info
}

const used = new Set(['IHDR', 'PLTE', 'IDAT'])

/** Reads header, palette and image data. Chunks of other kinds are skipped; those that are used must have their checksums right. */
export function readPng(name: string, file: Uint8Array): PngInfo {
  const view = new DataView(file.buffer, file.byteOffset, file.byteLength)
  const damaged = (what: string) => new CaptureError('damaged', `${name} is a damaged PNG file: ${what}. Copy it again.`)
  const info = readPngHead(name, file)
  let palette: Uint8Array | null = null
  const parts: Uint8Array[] = []
  let at = PNG_HEAD_BYTES
  let ended = false
  while (at + 12 <= file.byteLength) {
    const length = view.getUint32(at)
    const type = String.fromCharCode(...file.subarray(at + 4, at + 8))
    if (at + 12 + length > file.byteLength) {
      // The last chunk is cut off: its bytes are used, and the rows that are missing are found out below.
      if (type === 'IDAT') parts.push(file.subarray(at + 8))
      break
    }
    const body = file.subarray(at + 8, at + 8 + length)
    if (used.has(type) && crc32(file.subarray(at + 4, at + 8 + length)) !== view.getUint32(at + 8 + length)) throw damaged(`the checksum of its ${type} chunk is wrong`)
    if (type === 'IHDR') throw damaged('it has two headers')
    else if (type === 'PLTE') palette = body
    else if (type === 'IDAT') parts.push(body)
    else if (type === 'IEND') {
      ended = true
      break
    }
    at += 12 + length
  }
  if (parts.length === 0) throw ended ? damaged('it has no image in it') : new CaptureError('truncated', `${name} ends before its image begins. Copy it again from the card.`)
  if (info.colourType === 3 && (!palette || palette.byteLength % 3 !== 0)) throw damaged('its palette is missing')
  const data = new Uint8Array(parts.reduce((sum, part) => sum + part.byteLength, 0))
  let offset = 0
  for (const part of parts) {
    data.set(part, offset)
    offset += part.byteLength
  }
  return { ...info, palette, data }
}
