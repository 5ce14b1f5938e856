/**
 * FITS files (FITS Standard 4.0) with CHECKSUM and DATASUM.
 *
 * Images come with row 0 at the top and are written with the rows going up, as other programs expect (and
 * ROWORDER says so). A cube's planes follow one another, so that one of them can be fetched by an HTTP range.
 */
import { checksumOf, encodeChecksum } from './checksum'

const BLOCK = 2880
const CARD = 80

/** One header card. `value` undefined makes a comment card (HISTORY, COMMENT) of `comment`. */
export interface FitsCard { key: string, value?: string | number | boolean, comment?: string }

export interface FitsImageInput {
  width: number
  height: number
  /** Further axes, the slowest last: [] for one image, [3] for colour, [counts] or [3, counts] for a cube. */
  depth: number[]
  /** Planar samples, row 0 at the top, plane after plane. */
  data: Float32Array | Uint16Array
  cards: FitsCard[]
}

/** Characters that a FITS header can hold (ASCII 32-126); marks of the trade are written out, others become "?". */
export function asciiText(text: string): string {
  return text.replaceAll('″', '"').replaceAll('°', ' deg').replaceAll('µ', 'u').replaceAll('×', 'x').replaceAll('−', '-').replaceAll('σ', 'sigma').replaceAll('à', 'a')
    .replaceAll(/[–—]/g, '-').replaceAll(/[‘’]/g, '\'').replaceAll(/[“”]/g, '"').replaceAll('\u00a0', ' ')
    .normalize('NFKD').replaceAll(/[\u0300-\u036f]/g, '').replaceAll(/[^\x20-\x7e]/g, '?')
}

function valueText(value: string | number | boolean): string {
  if (typeof value === 'boolean') return (value ? 'T' : 'F').padStart(20)
  if (typeof value === 'number') {
    if (!Number.isFinite(value)) throw new RangeError('A FITS card has finite numbers only.')
    return (Number.isInteger(value) && Math.abs(value) < 1e15 ? String(value) : value.toExponential().length < 20 && String(value).length > 20 ? value.toExponential() : String(value)).toUpperCase().padStart(20)
  }
  return `'${asciiText(value).replaceAll('\'', '\'\'').padEnd(8)}'`
}

/** The 80 characters of a card. Long texts of values are cut; long HISTORY is split by cardsOf. */
function cardText({ key, value, comment }: FitsCard): string {
  const name = key.padEnd(8)
  if (value === undefined) return `${name}${asciiText(comment ?? '')}`.padEnd(CARD).slice(0, CARD)
  let text = `${name}= ${valueText(value)}`
  if (text.length > CARD) {
    // Cut inside the quotes, never after an odd apostrophe.
    const inner = asciiText(String(value)).slice(0, 66)
    for (let length = inner.length; ; length--) {
      text = `${name}= '${inner.slice(0, length).replaceAll('\'', '\'\'')}'`
      if (text.length <= CARD) break
    }
  }
  if (comment && text.length + 3 < CARD) text += ` / ${asciiText(comment)}`
  return text.padEnd(CARD).slice(0, CARD)
}

/** HISTORY (or COMMENT) cards of a long text, broken at spaces where there are some. */
export function textCards(key: 'HISTORY' | 'COMMENT', text: string): FitsCard[] {
  const cards: FitsCard[] = []
  let rest = asciiText(text)
  while (rest.length > 0) {
    if (rest.length <= 71) {
      cards.push({ key, comment: rest })
      break
    }
    const space = rest.lastIndexOf(' ', 71)
    const cut = space > 40 ? space : 71
    cards.push({ key, comment: rest.slice(0, cut) })
    rest = rest.slice(space > 40 ? cut + 1 : cut)
  }
  return cards
}

function headerBytes(cards: FitsCard[]): Uint8Array<ArrayBuffer> {
  const text = [...cards.map(cardText), 'END'.padEnd(CARD)].join('')
  const bytes = new Uint8Array(Math.ceil(text.length / BLOCK) * BLOCK).fill(32)
  for (let i = 0; i < text.length; i++) bytes[i] = text.charCodeAt(i)
  return bytes
}

/** The bytes of a FITS file. uint16 data are stored as the standard has it: signed with BZERO 32768. */
export function encodeFits({ width, height, depth, data, cards }: FitsImageInput): Uint8Array<ArrayBuffer> {
  const plane = width * height
  const planes = depth.reduce((product, length) => product * length, 1)
  if (data.length !== plane * planes) throw new RangeError(`The data hold ${data.length} samples, the axes ${plane * planes}.`)
  const unsigned = data instanceof Uint16Array
  const bytesPerSample = unsigned ? 2 : 4
  const body = new Uint8Array(Math.ceil(data.length * bytesPerSample / BLOCK) * BLOCK)
  const view = new DataView(body.buffer)
  let at = 0
  for (let p = 0; p < planes; p++) {
    for (let y = height - 1; y >= 0; y--) {
      const row = p * plane + y * width
      if (unsigned) for (let x = 0; x < width; x++, at += 2) view.setInt16(at, data[row + x]! - 32768, false)
      else for (let x = 0; x < width; x++, at += 4) view.setFloat32(at, data[row + x]!, false)
    }
  }
  const dataSum = checksumOf(body)
  const axes = [width, height, ...depth]
  const all = (checksum: string): FitsCard[] => [
    { key: 'SIMPLE', value: true },
    { key: 'BITPIX', value: unsigned ? 16 : -32 },
    { key: 'NAXIS', value: axes.length },
    ...axes.map((length, i) => ({ key: `NAXIS${i + 1}`, value: length })),
    ...(unsigned ? [{ key: 'BZERO', value: 32768 }, { key: 'BSCALE', value: 1 }] : []),
    ...cards.filter(card => card.value !== undefined),
    { key: 'CHECKSUM', value: checksum },
    { key: 'DATASUM', value: String(dataSum) },
    ...cards.filter(card => card.value === undefined),
  ]
  const sum = checksumOf(headerBytes(all('0'.repeat(16))), dataSum)
  const header = headerBytes(all(encodeChecksum(sum)))
  const file = new Uint8Array(header.byteLength + body.byteLength)
  file.set(header)
  file.set(body, header.byteLength)
  return file
}

/** Where the planes of a cube written by encodeFits lie. */
export interface CubeLayout { width: number, height: number, planes: 1 | 3, count: number, dataOffset: number, frameBytes: number }

/** Reads the layout of a float32 cube from the first bytes of its file; null where more bytes are needed or it is none. */
export function cubeLayout(head: Uint8Array): CubeLayout | null {
  const axes: number[] = []
  for (let at = 0; at + CARD <= head.byteLength; at += CARD) {
    const text = String.fromCharCode(...head.subarray(at, at + CARD))
    const axis = /^NAXIS([1-9]) *= *(\d+)/.exec(text)
    if (axis) axes[Number(axis[1]) - 1] = Number(axis[2])
    if (text.startsWith('END ')) {
      const [width, height] = axes
      if (!width || !height) return null
      const planes = axes.length === 4 && axes[2] === 3 ? 3 : 1
      const count = axes.slice(planes === 3 ? 3 : 2).reduce((product, length) => product * length, 1)
      return { width, height, planes, count, dataOffset: Math.ceil((at + CARD) / BLOCK) * BLOCK, frameBytes: width * height * planes * 4 }
    }
  }
  return null
}

/** Samples of one frame of a cube from its bytes, row 0 at the top. */
export function decodeCubeFrame(bytes: Uint8Array, layout: CubeLayout): Float32Array<ArrayBuffer> {
  const { width, height, planes } = layout
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength)
  const out = new Float32Array(width * height * planes)
  let at = 0
  for (let p = 0; p < planes; p++) {
    for (let y = height - 1; y >= 0; y--) {
      const row = p * width * height + y * width
      for (let x = 0; x < width; x++, at += 4) out[row + x] = view.getFloat32(at, false)
    }
  }
  return out
}
