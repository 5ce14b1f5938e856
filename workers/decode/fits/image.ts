/** The first image of a FITS file: its shape, and what the keywords say. */
import { mosaicPatterns, type CaptureFacts, type CaptureNote, type MosaicPattern } from '../../../shared/schemas/capture'
import type { ByteSource } from '../../source/types'
import { info } from '../facts'
import { checkFrameSize } from '../limits'
import { CaptureError } from '../types'
import type { CardValue, FitsHeader } from './header'
import { nextHeaderOffset, readHeader } from './header'
import type { SampleFormat } from './samples'

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

const MAX_UNITS = 1000

/** Finds the first unit that holds an image of two axes or more. */
export async function readFitsImage(source: ByteSource, signal?: AbortSignal): Promise<FitsImage> {
  let offset = 0
  const inherited = new Map<string, CardValue>()
  for (let unit = 0; unit < MAX_UNITS && offset < source.size; unit++) {
    const header = await readHeader(source, offset, signal)
    const type = unit === 0 ? 'IMAGE' : header.cards.get('XTENSION')
    if (unit === 0 && header.cards.get('SIMPLE') === undefined) throw new CaptureError('damaged', `${source.name} does not begin as a FITS file must (SIMPLE). It is damaged or of another kind.`)
    if (type === 'BINTABLE' && header.cards.get('ZIMAGE') === true) {
      throw new CaptureError('unsupported-compression', `${source.name} holds a tile-compressed FITS image (${String(header.cards.get('ZCMPTYPE') ?? 'unknown method')}). Unpack it with a general FITS tool (funpack) and open the unpacked file.`)
    }
    if (type === 'IMAGE' && Number(header.cards.get('NAXIS')) >= 2 && header.dataBytes > 0) return shapeOf(source, header, inherited)
    if (unit === 0) for (const [key, value] of header.cards) inherited.set(key, value)
    offset = nextHeaderOffset(header)
  }
  throw new CaptureError('no-frames', `${source.name} is a FITS file without an image in it.`)
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
