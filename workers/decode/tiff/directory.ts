/**
 * The chain of pages of a TIFF file (TIFF 6.0; BigTIFF), walked by ourselves: each page once, with caps on pages and
 * entries, so that a looped chain ends at once.
 */
import type { ByteSource } from '../../source/types'
import { MAX_PAGES } from '../limits'
import { CaptureError } from '../types'

export interface TiffPage {
  width: number
  height: number
  bits: number
  samples: number
  /** 1 unsigned, 2 signed, 3 float. */
  sampleFormat: number
  compression: number
  photometric: number
  planar: boolean
  predictor: number
  rowsPerStrip: number
  tile: { width: number, height: number } | null
  offsets: number[]
  byteCounts: number[]
  littleEndian: boolean
  colourMap: number[] | null
}

const sizes: Record<number, number> = { 1: 1, 2: 1, 3: 2, 4: 4, 5: 8, 6: 1, 7: 1, 8: 2, 9: 4, 10: 8, 11: 4, 12: 8, 13: 4, 16: 8, 17: 8, 18: 8 }
const wanted = new Set([256, 257, 258, 259, 262, 273, 277, 278, 279, 284, 317, 320, 322, 323, 324, 325, 339])
/** One read of so many bytes takes in most directories whole. */
const HEAD_BYTES = 512
/** A page with more strips than this is damaged. */
const MAX_VALUES = 4_000_000

export interface TiffLayout { littleEndian: boolean, big: boolean, first: number }

/** The head of the file; null where it is not one of TIFF. */
export function tiffLayout(head: Uint8Array): TiffLayout | null {
  if (head.byteLength < 8) return null
  const view = new DataView(head.buffer, head.byteOffset, head.byteLength)
  const mark = view.getUint16(0)
  if (mark !== 0x4949 && mark !== 0x4d4d) return null
  const littleEndian = mark === 0x4949
  const version = view.getUint16(2, littleEndian)
  if (version === 42) return { littleEndian, big: false, first: view.getUint32(4, littleEndian) }
  if (version === 43 && head.byteLength >= 16 && view.getUint16(4, littleEndian) === 8) return { littleEndian, big: true, first: Number(view.getBigUint64(8, littleEndian)) }
  return null
}

/** Reads one directory and where the next begins (0 at the end). */
export async function readPage(source: ByteSource, { littleEndian, big }: TiffLayout, offset: number, signal?: AbortSignal): Promise<{ page: TiffPage, next: number }> {
  const damaged = (what: string) => new CaptureError('damaged', `${source.name} is a damaged TIFF file: ${what}. Copy it again.`)
  const countBytes = big ? 8 : 2
  const entryBytes = big ? 20 : 12
  if (offset + countBytes > source.size) throw new CaptureError('truncated', `${source.name} ends before its pages. Copy it again from the card.`)
  const viewOf = async (at: number, length: number) => {
    if (at < 0 || length < 0 || at + length > source.size) throw new CaptureError('truncated', `${source.name} ends within a page. Copy it again from the card.`)
    const bytes = await source.read(at, length, signal)
    return new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength)
  }
  const head = await viewOf(offset, Math.min(HEAD_BYTES, source.size - offset))
  const count = big ? Number(head.getBigUint64(0, littleEndian)) : head.getUint16(0, littleEndian)
  if (count === 0 || count > 4096) throw damaged('a page has no entries or far too many')
  const tableBytes = count * entryBytes + (big ? 8 : 4)
  const view = countBytes + tableBytes <= head.byteLength ? new DataView(head.buffer, head.byteOffset + countBytes, tableBytes) : await viewOf(offset + countBytes, tableBytes)
  const tags = new Map<number, number[]>()
  for (let i = 0; i < count; i++) {
    const at = i * entryBytes
    const tag = view.getUint16(at, littleEndian)
    // An entry that is there twice counts once, so that a page cannot ask for the same long list again and again.
    if (!wanted.has(tag) || tags.has(tag)) continue
    const type = view.getUint16(at + 2, littleEndian)
    const n = big ? Number(view.getBigUint64(at + 4, littleEndian)) : view.getUint32(at + 4, littleEndian)
    const size = sizes[type]
    if (!size || n > MAX_VALUES) throw damaged(`entry ${tag} cannot be`)
    const inline = big ? 8 : 4
    const where = at + (big ? 12 : 8)
    const values = size * n <= inline ? new DataView(view.buffer, view.byteOffset + where, inline) : await viewOf(big ? Number(view.getBigUint64(where, littleEndian)) : view.getUint32(where, littleEndian), size * n)
    tags.set(tag, Array.from({ length: n }, (_, k) => {
      if (type === 3) return values.getUint16(2 * k, littleEndian)
      if (type === 4 || type === 13) return values.getUint32(4 * k, littleEndian)
      if (type === 16 || type === 18) return Number(values.getBigUint64(8 * k, littleEndian))
      return values.getUint8(size * k)
    }))
  }
  const next = big ? Number(view.getBigUint64(count * entryBytes, littleEndian)) : view.getUint32(count * entryBytes, littleEndian)
  const one = (tag: number, fallback: number) => tags.get(tag)?.[0] ?? fallback
  const width = one(256, 0)
  const height = one(257, 0)
  const tiled = tags.has(322)
  const page: TiffPage = {
    width, height, bits: one(258, 1), samples: one(277, 1), sampleFormat: one(339, 1), compression: one(259, 1), photometric: one(262, 1), planar: one(284, 1) === 2, predictor: one(317, 1),
    rowsPerStrip: Math.min(height, one(278, height)), tile: tiled ? { width: one(322, 0), height: one(323, 0) } : null,
    offsets: tags.get(tiled ? 324 : 273) ?? [], byteCounts: tags.get(tiled ? 325 : 279) ?? [], littleEndian, colourMap: tags.get(320) ?? null,
  }
  if ((tags.get(258) ?? []).some(bits => bits !== page.bits)) throw new CaptureError('unsupported-depth', `${source.name} has colours of different depths, which Lull does not read.`)
  return { page, next }
}

/** Offsets of all pages, in their order. Walks the chain by its links only, which costs a few bytes a page. */
export async function pageOffsets(source: ByteSource, layout: TiffLayout, signal?: AbortSignal): Promise<{ offsets: number[], looped: boolean, cut: boolean }> {
  const { littleEndian, big } = layout
  const seen = new Set<number>()
  const offsets: number[] = []
  let offset = layout.first
  while (offset !== 0) {
    if (seen.has(offset)) return { offsets, looped: true, cut: false }
    if (offsets.length >= MAX_PAGES) throw new CaptureError('too-large', `${source.name} has more than ${MAX_PAGES.toLocaleString('en')} pages, more than Lull reads from one TIFF file. Save the recording as SER or FITS.`)
    const countBytes = big ? 8 : 2
    if (offset + countBytes > source.size) return { offsets, looped: false, cut: true }
    const head = await source.read(offset, Math.min(HEAD_BYTES, source.size - offset), signal)
    const view = new DataView(head.buffer, head.byteOffset, head.byteLength)
    const count = big ? Number(view.getBigUint64(0, littleEndian)) : view.getUint16(0, littleEndian)
    const linkAt = offset + countBytes + count * (big ? 20 : 12)
    const linkBytes = big ? 8 : 4
    if (count > 4096 || linkAt + linkBytes > source.size) return { offsets, looped: false, cut: true }
    seen.add(offset)
    offsets.push(offset)
    const inHead = linkAt - offset
    const link = inHead + linkBytes <= head.byteLength ? head.subarray(inHead, inHead + linkBytes) : await source.read(linkAt, linkBytes, signal)
    const linkView = new DataView(link.buffer, link.byteOffset, link.byteLength)
    offset = big ? Number(linkView.getBigUint64(0, littleEndian)) : linkView.getUint32(0, littleEndian)
  }
  return { offsets, looped: false, cut: false }
}
