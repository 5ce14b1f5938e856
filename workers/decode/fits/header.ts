/** FITS headers (FITS Standard 4.0, sections 3 and 4): blocks of 2880 bytes, cards of 80 characters. */
import type { ByteSource } from '../../source/types'
import { CaptureError } from '../types'

export const FITS_BLOCK = 2880
const CARD = 80
/** More header than this is no header: 1,000 blocks are 36,000 cards. */
const MAX_HEADER_BLOCKS = 1000

export type CardValue = string | number | boolean | null

export interface FitsHeader {
  cards: Map<string, CardValue>
  /** Where the data of this unit begin, and how many bytes they have without padding. */
  dataOffset: number
  dataBytes: number
}

/** The value of a card from its columns 11-80; null for an undefined value. */
export function parseValue(text: string): CardValue {
  const trimmed = text.trim()
  if (trimmed.startsWith('\'')) {
    let value = ''
    for (let i = 1; i < trimmed.length; i++) {
      if (trimmed[i] === '\'') {
        if (trimmed[i + 1] !== '\'') break
        i++
      }
      value += trimmed[i]
    }
    return value.trimEnd()
  }
  const word = trimmed.split('/')[0]!.trim()
  if (word === 'T') return true
  if (word === 'F') return false
  if (word === '') return null
  const number = Number(word.replace(/[dD]/, 'E'))
  return Number.isFinite(number) ? number : word
}

/** Reads the header that begins at `offset`. Throws CaptureError for what is no header. */
export async function readHeader(source: ByteSource, offset: number, signal?: AbortSignal): Promise<FitsHeader> {
  const cards = new Map<string, CardValue>()
  const damaged = (what: string) => new CaptureError('damaged', `${source.name} has a damaged FITS header: ${what}. Copy the file again, or write it again with the program that made it.`)
  for (let block = 0; block < MAX_HEADER_BLOCKS; block++) {
    const at = offset + block * FITS_BLOCK
    if (at + FITS_BLOCK > source.size) throw new CaptureError('truncated', `${source.name} ends within its header. Copy it again from the card.`)
    const bytes = await source.read(at, FITS_BLOCK, signal)
    for (let card = 0; card < FITS_BLOCK / CARD; card++) {
      let text = ''
      for (let i = 0; i < CARD; i++) text += String.fromCharCode(bytes[card * CARD + i]!)
      const key = text.slice(0, 8).trimEnd()
      if (key === 'END') {
        const header = { cards, dataOffset: at + FITS_BLOCK, dataBytes: 0 }
        header.dataBytes = sizeOfData(cards, damaged)
        return header
      }
      if (text.slice(8, 10) === '= ' && !cards.has(key)) cards.set(key, parseValue(text.slice(10)))
    }
  }
  throw damaged('it has no end')
}

function sizeOfData(cards: Map<string, CardValue>, damaged: (what: string) => CaptureError): number {
  const bitpix = cards.get('BITPIX')
  const naxis = cards.get('NAXIS')
  if (typeof bitpix !== 'number') throw damaged('BITPIX is missing or cannot be')
  if (![8, 16, 32, 64, -32, -64].includes(bitpix)) {
    throw new CaptureError('unsupported-depth', `The FITS header says BITPIX ${String(bitpix)}; the standard knows 8, 16, 32, 64, −32 and −64. The file is damaged, or was written wrongly.`)
  }
  if (typeof naxis !== 'number' || !Number.isInteger(naxis) || naxis < 0 || naxis > 999) throw damaged('NAXIS is missing or cannot be')
  if (naxis === 0) return 0
  let elements = 1
  for (let axis = 1; axis <= naxis; axis++) {
    const length = cards.get(`NAXIS${axis}`)
    if (typeof length !== 'number' || !Number.isInteger(length) || length < 0) throw damaged(`NAXIS${axis} is missing or cannot be`)
    elements *= length
  }
  const pcount = Number(cards.get('PCOUNT') ?? 0)
  const gcount = Number(cards.get('GCOUNT') ?? 1)
  const bytes = Math.abs(bitpix) / 8 * gcount * (pcount + elements)
  if (!Number.isSafeInteger(bytes) || bytes < 0) throw damaged('its axes are too long to be')
  return bytes
}

/** Where the next header begins after the data of this one. */
export function nextHeaderOffset(header: FitsHeader): number {
  return header.dataOffset + Math.ceil(header.dataBytes / FITS_BLOCK) * FITS_BLOCK
}
