/** The first image of a FITS file: its shape, and what the keywords say. */
import { mosaicPatterns, type CaptureFacts, type CaptureNote, type MosaicPattern } from '../../../shared/schemas/capture'
import type { ByteSource } from '../../source/types'
import { info, trouble } from '../facts'
import { checkFrameSize } from '../limits'
import { CaptureError } from '../types'
import type { CardValue, FitsHeader } from './header'
import { nextHeaderOffset, readHeader } from './header'
import type { SampleFormat } from './samples'

/** Images of a file: the first, and where the data of all those of the same shape begin. */
export interface FitsImages extends FitsImage {
  /** One for each image of the first one's shape and kind, in the order of the file; the first image included. */
  parts: { dataOffset: number, startMs: number | null }[]
}

export interface FitsImage {
  width: number
  height: number
  planes: 1 | 3
  /** Frames that the header declares. */
  declared: number
  format: SampleFormat
  dataOffset: number
  topDown: boolean
  cards: Map<string, CardValue>
  notes: CaptureNote[]
}

const MAX_UNITS = 20_000

/** Finds the units that hold an image of two axes or more: the first one, and those that are like it. */
export async function readFitsImages(source: ByteSource, signal?: AbortSignal): Promise<FitsImages> {
  let offset = 0
  let images: FitsImages | null = null
  let others = 0
  const inherited = new Map<string, CardValue>()
  for (let unit = 0; unit < MAX_UNITS && offset < source.size; unit++) {
    let header: FitsHeader
    try {
      header = await readHeader(source, offset, signal)
    }
    catch (error) {
      // Bytes after the last unit (special records, or a cut) do not take away from the images before them.
      if (images && error instanceof CaptureError) break
      throw error
    }
    const type = unit === 0 ? 'IMAGE' : header.cards.get('XTENSION')
    if (unit === 0 && header.cards.get('SIMPLE') === undefined) throw new CaptureError('damaged', `${source.name} does not begin as a FITS file must (SIMPLE). It is damaged or of another kind.`)
    if (type === 'BINTABLE' && header.cards.get('ZIMAGE') === true) {
      if (!images) throw new CaptureError('unsupported-compression', `${source.name} holds a tile-compressed FITS image (${String(header.cards.get('ZCMPTYPE') ?? 'unknown method')}). Unpack it with a general FITS tool (funpack) and open the unpacked file.`)
    }
    if (type === 'IMAGE' && Number(header.cards.get('NAXIS')) >= 2 && header.dataBytes > 0) {
      if (!images) {
        const image = shapeOf(source, header, inherited)
        images = { ...image, parts: [{ dataOffset: image.dataOffset, startMs: startOfCards(image.cards) }] }
      }
      else if (sameShape(images.cards, header.cards)) images.parts.push({ dataOffset: header.dataOffset, startMs: startOfCards(header.cards) })
      else others++
    }
    if (unit === 0) for (const [key, value] of header.cards) inherited.set(key, value)
    offset = nextHeaderOffset(header)
  }
  if (images) {
    if (images.parts.length > 1) images.notes.push(info('extensions', `The file holds ${images.parts.length.toLocaleString('en')} images of one size in its extensions; each is taken as ${images.declared === 1 ? 'a frame' : `${images.declared.toLocaleString('en')} frames`}, in the order of the file.`))
    if (others > 0) images.notes.push(trouble('extensions', `The file holds ${others === 1 ? 'another image' : `${others.toLocaleString('en')} other images`} of another size or kind of number, which ${others === 1 ? 'is' : 'are'} left out; the first image is used. Save the image you want as a file of its own if that is the wrong one.`))
    return images
  }
  throw new CaptureError('no-frames', `${source.name} is a FITS file without an image in it.`)
}

/** Whether an image has the axes and the numbers of another. */
function sameShape(a: Map<string, CardValue>, b: Map<string, CardValue>): boolean {
  const naxis = Number(a.get('NAXIS'))
  if (Number(b.get('NAXIS')) !== naxis) return false
  const keys = [...Array.from({ length: naxis }, (_, i) => `NAXIS${i + 1}`), 'BITPIX']
  return keys.every(key => a.get(key) === b.get(key)) && (a.get('BZERO') ?? 0) === (b.get('BZERO') ?? 0) && (a.get('BSCALE') ?? 1) === (b.get('BSCALE') ?? 1) && (a.get('BLANK') ?? null) === (b.get('BLANK') ?? null)
}

function shapeOf(source: ByteSource, header: FitsHeader, inherited: Map<string, CardValue>): FitsImage {
  const cards = new Map([...inherited, ...header.cards])
  const naxis = Number(header.cards.get('NAXIS'))
  const axes = Array.from({ length: naxis }, (_, i) => Number(header.cards.get(`NAXIS${i + 1}`)))
  const [width, height] = axes as [number, number]
  const deeper = axes.slice(2).filter(length => length !== 1)
  const notes: CaptureNote[] = []
  let planes: 1 | 3 = 1
  let declared = deeper.reduce((product, length) => product * length, 1)
  const saysColour = /rgb|colou?r/i.test(`${String(cards.get('CTYPE3') ?? '')} ${String(cards.get('COLORSPC') ?? '')} ${String(cards.get('COLORTYP') ?? '')}`)
  if (deeper[0] === 3 && (deeper.length > 1 || saysColour)) {
    planes = 3
    declared /= 3
  }
  else if (deeper.length === 1 && deeper[0] === 3) {
    notes.push(info('planes', 'The cube has three planes; they are taken as three frames, because the header does not say that they are colours.'))
  }
  checkFrameSize(source.name, width, height, planes)
  const number = (key: string, fallback: number) => (typeof cards.get(key) === 'number' ? cards.get(key) as number : fallback)
  const blank = cards.get('BLANK')
  return {
    width, height, planes, declared,
    format: { bitpix: number('BITPIX', 8), bzero: number('BZERO', 0), bscale: number('BSCALE', 1), blank: typeof blank === 'number' ? blank : null },
    dataOffset: header.dataOffset,
    topDown: /top/i.test(String(cards.get('ROWORDER') ?? '')),
    cards, notes,
  }
}

/** Facts that keywords carry; standard ones and those customary in amateur files. */
export function factsOfCards(cards: Map<string, CardValue>): Partial<CaptureFacts> {
  const text = (...keys: string[]) => {
    for (const key of keys) {
      const value = cards.get(key)
      if (typeof value === 'string' && value.trim()) return value.trim()
    }
    return ''
  }
  const positive = (...keys: string[]) => {
    for (const key of keys) {
      const value = cards.get(key)
      if (typeof value === 'number' && value > 0) return value
    }
    return null
  }
  const exposure = positive('XPOSURE', 'EXPTIME', 'EXPOSURE')
  const pattern = text('BAYERPAT').toUpperCase() as MosaicPattern
  return {
    observer: text('OBSERVER'), instrument: text('INSTRUME'), telescope: text('TELESCOP'), object: text('OBJECT'), filter: text('FILTER'),
    exposureMs: exposure === null ? null : exposure * 1000,
    pixelSizeUm: positive('XPIXSZ', 'PIXSIZE1'), focalLengthMm: positive('FOCALLEN'), apertureMm: positive('APTDIA'),
    mosaic: mosaicPatterns.includes(pattern) && pattern !== ('NONE' as string) ? pattern : 'none',
    saturation: positive('SATURATE', 'DATAMAX'),
  }
}

/** Start in ms since 1970 UTC by DATE-BEG or DATE-OBS (ISO 8601, UTC), or null. */
export function startOfCards(cards: Map<string, CardValue>): number | null {
  for (const key of ['DATE-BEG', 'DATE-OBS']) {
    const value = cards.get(key)
    if (typeof value !== 'string') continue
    const time = /^\d{4}-\d{2}-\d{2}$/.test(value) ? `${value}T00:00:00Z` : /[zZ]|[+-]\d{2}:\d{2}$/.test(value) ? value : `${value}Z`
    const ms = Date.parse(time)
    if (Number.isFinite(ms)) return ms
  }
  return null
}
