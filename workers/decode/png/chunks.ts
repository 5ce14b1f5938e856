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

const used = new Set(['IHDR', 'PLTE', 'IDAT'])

/** Reads header, palette and image data. Chunks of other kinds are skipped; those that are used must have their checksums right. */
export function readPng(name: string, file: Uint8Array): PngInfo {
  const view = new DataView(file.buffer, file.byteOffset, file.byteLength)
  const damaged = (what: string) => new CaptureError('damaged', `${name} is a damaged PNG file: ${what}. Copy it again.`)
  if (file.byteLength < 33) throw new CaptureError('truncated', `${name} ends within its header. Copy it again from the card.`)
  let info: Omit<PngInfo, 'data' | 'palette'> | null = null
  let palette: Uint8Array | null = null
  const parts: Uint8Array[] = []
  let at = 8
  let ended = false
  while (at + 12 <= file.byteLength) {
    const length = view.getUint32(at)
    const type = String.fromCharCode(...file.subarray(at + 4, at + 8))
    if (at + 12 + length > file.byteLength) {
      // The last chunk is cut off: its bytes are used, and the rows that are missing are found out below.
      if (type === 'IDAT' && info) parts.push(file.subarray(at + 8))
      break
    }
    const body = file.subarray(at + 8, at + 8 + length)
    if (used.has(type) && crc32(file.subarray(at + 4, at + 8 + length)) !== view.getUint32(at + 8 + length)) throw damaged(`the checksum of its ${type} chunk is wrong`)
    if (!info && type !== 'IHDR') throw damaged('it does not begin with its header')
    if (type === 'IHDR') {
      if (length !== 13 || info) throw damaged('its header cannot be')
      const [bitDepth, colourType, compression, filter, interlace] = [...body.subarray(8)] as [number, number, number, number, number]
      info = { width: view.getUint32(at + 8), height: view.getUint32(at + 12), bitDepth, colourType, interlaced: interlace === 1 }
      checkFrameSize(name, info.width, info.height, colourType === 2 || colourType === 6 || colourType === 3 ? 3 : 1)
      if (!depths[colourType]?.includes(bitDepth)) throw new CaptureError('unsupported-depth', `${name} says it has ${bitDepth} bits of colour type ${colourType}, which PNG does not know. The file is damaged, or was written wrongly.`)
      if (compression !== 0 || filter !== 0 || interlace > 1) throw new CaptureError('unsupported-compression', `${name} is packed in a way that the PNG standard does not know.`)
    }
    else if (type === 'PLTE') palette = body
    else if (type === 'IDAT') parts.push(body)
    else if (type === 'IEND') {
      ended = true
      break
    }
    at += 12 + length
  }
  if (!info) throw damaged('it has no header')
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
