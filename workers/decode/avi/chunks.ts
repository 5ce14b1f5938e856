/**
 * The chunks of an AVI file: Microsoft's RIFF and AVI 1.0, and the OpenDML extensions of 1996 (more RIFF lists, an index
 * of indexes). Only headers and indexes are read, never the frames.
 */
import type { ByteSource } from '../../source/types'
import { MAX_FRAMES } from '../limits'
import { CaptureError } from '../types'

export interface AviStream {
  width: number
  height: number
  topDown: boolean
  bits: number
  /** Four characters, or an empty text for plain bitmaps. */
  codec: string
  /** 256 colours as red, green, blue; null where there is no palette. */
  palette: Uint8Array | null
  framesPerSecond: number | null
}

export interface AviFrames { offsets: number[], sizes: number[], cut: boolean }

const fourcc = (view: DataView, at: number) => String.fromCharCode(view.getUint8(at), view.getUint8(at + 1), view.getUint8(at + 2), view.getUint8(at + 3))
/** Headers larger than this, and files of more lists, are damaged. */
const MAX_HEADER = 1 << 20
const MAX_LISTS = 10_000
const WINDOW = 1 << 16

interface Found { stream: AviStream | null, prefix: string, index: DataView | null, movi: { start: number, end: number }[], idx1: { at: number, bytes: number } | null, cut: boolean }

async function viewOf(source: ByteSource, at: number, length: number, signal?: AbortSignal): Promise<DataView> {
  if (at < 0 || length < 0 || at + length > source.size) throw new CaptureError('truncated', `${source.name} ends within its headers. Copy it again from the card.`)
  const bytes = await source.read(at, length, signal)
  return new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength)
}

/** Walks the lists of the file and reads the header of its first picture stream. */
export async function readAvi(source: ByteSource, signal?: AbortSignal): Promise<Found> {
  const found: Found = { stream: null, prefix: '', index: null, movi: [], idx1: null, cut: false }
  let at = 0
  for (let lists = 0; at + 12 <= source.size && lists < MAX_LISTS; lists++) {
    const head = await viewOf(source, at, 12, signal)
    const kind = fourcc(head, 0)
    const bytes = head.getUint32(4, true)
    if (kind === 'RIFF') {
      at += 12
      continue
    }
    const type = fourcc(head, 8)
    if (kind === 'LIST' && type === 'movi') {
      // A recording that was stopped hard has no length here: the rest of the file is frames.
      const end = bytes < 4 ? source.size : at + 8 + bytes
      found.movi.push({ start: at + 8, end: Math.min(end, source.size) })
      if (end > source.size || bytes < 4) {
        found.cut = true
        break
      }
    }
    else if (kind === 'LIST' && type === 'hdrl' && !found.stream) readStreams(await viewOf(source, at + 12, Math.min(bytes - 4, MAX_HEADER), signal), found)
    else if (kind === 'idx1' && !found.idx1) found.idx1 = { at: at + 8, bytes: Math.min(bytes, source.size - at - 8) }
    at += 8 + bytes + bytes % 2
  }
  return found
}

function readStreams(view: DataView, found: Found): void {
  let number = -1
  let video = false
  let rate: number | null = null
  for (let at = 0; at + 8 <= view.byteLength;) {
    const kind = fourcc(view, at)
    const bytes = view.getUint32(at + 4, true)
    if (kind === 'LIST') {
      // A list's chunks follow its type.
      at += 12
      continue
    }
    const body = at + 8
    const whole = body + bytes <= view.byteLength
    if (kind === 'strh' && whole && bytes >= 28) {
      number++
      video = fourcc(view, body) === 'vids' && !found.stream
      const scale = view.getUint32(body + 20, true)
      rate = scale > 0 ? view.getUint32(body + 24, true) / scale : null
    }
    else if (kind === 'strf' && video && whole && bytes >= 40) {
      const height = view.getInt32(body + 8, true)
      const bits = view.getUint16(body + 14, true)
      const codec = view.getUint32(body + 16, true)
      const used = Math.min(256, view.getUint32(body + 32, true) || 256, Math.floor((bytes - 40) / 4))
      const palette = bits === 8 && codec === 0 && used > 0 ? new Uint8Array(768) : null
      for (let i = 0; palette && i < used; i++) for (let c = 0; c < 3; c++) palette[3 * i + c] = view.getUint8(body + 40 + 4 * i + 2 - c)
      found.stream = { width: view.getInt32(body + 4, true), height: Math.abs(height), topDown: height < 0, bits, codec: codec === 0 ? '' : fourcc(view, body + 16), palette, framesPerSecond: rate && rate > 0 ? rate : null }
      found.prefix = String(number).padStart(2, '0')
    }
    else if (kind === 'indx' && video && whole && bytes >= 24 && found.stream && !found.index) found.index = new DataView(view.buffer, view.byteOffset + body, bytes)
    at = body + bytes + bytes % 2
  }
}

/** Where the frames are, by the index of indexes, by the old index, or else by walking from chunk to chunk. */
export async function aviFrames(source: ByteSource, found: Found, signal?: AbortSignal): Promise<AviFrames> {
  return await byOpenDml(source, found, signal) ?? await byOldIndex(source, found, signal) ?? byWalking(source, found, signal)
}

async function byOpenDml(source: ByteSource, { index }: Found, signal?: AbortSignal): Promise<AviFrames | null> {
  if (!index || index.getUint16(0, true) !== 4 || index.getUint8(3) !== 0) return null
  const frames: AviFrames = { offsets: [], sizes: [], cut: false }
  const entries = Math.min(index.getUint32(4, true), Math.floor((index.byteLength - 24) / 16))
  for (let i = 0; i < entries; i++) {
    const at = Number(index.getBigUint64(24 + 16 * i, true))
    const bytes = index.getUint32(32 + 16 * i, true)
    if (at === 0) continue
    if (bytes < 32 || at + bytes > source.size) return null
    const view = await viewOf(source, at, bytes, signal)
    if (view.getUint16(8, true) !== 2 || view.getUint8(11) !== 1) return null
    const base = Number(view.getBigUint64(20, true))
    const count = Math.min(view.getUint32(12, true), Math.floor((bytes - 32) / 8))
    if (frames.offsets.length + count > MAX_FRAMES) return null
    for (let k = 0; k < count; k++) {
      const offset = base + view.getUint32(32 + 8 * k, true)
      const size = view.getUint32(36 + 8 * k, true) & 0x7fffffff
      if (offset + size > source.size) frames.cut = true
      else push(frames, offset, size)
    }
  }
  return frames.offsets.length > 0 ? frames : null
}

function push(frames: AviFrames, offset: number, size: number) {
  frames.offsets.push(offset)
  frames.sizes.push(size)
}

async function byOldIndex(source: ByteSource, { idx1, movi, prefix }: Found, signal?: AbortSignal): Promise<AviFrames | null> {
  // With several lists of frames the old index covers the first only.
  if (!idx1 || movi.length !== 1 || idx1.bytes < 16) return null
  const frames: AviFrames = { offsets: [], sizes: [], cut: false }
  const start = movi[0]!.start
  let base: number | null = null
  for (let done = 0; done + 16 <= idx1.bytes; done += WINDOW) {
    const view = await viewOf(source, idx1.at + done, Math.min(WINDOW, idx1.bytes - done), signal)
    for (let at = 0; at + 16 <= view.byteLength; at += 16) {
      const id = fourcc(view, at)
      if (id !== `${prefix}db` && id !== `${prefix}dc`) continue
      const offset = view.getUint32(at + 8, true)
      if (base === null) {
        // Offsets count from the list in most files and from the begin of the file in some.
        for (const candidate of [start, 0]) {
          if (base === null && candidate + offset + 8 <= source.size && fourcc(await viewOf(source, candidate + offset, 4, signal), 0) === id) base = candidate
        }
        if (base === null) return null
      }
      const size = view.getUint32(at + 12, true)
      if (base + offset + 8 + size > source.size) frames.cut = true
      else push(frames, base + offset + 8, size)
    }
  }
  return frames.offsets.length > 0 ? frames : null
}

async function byWalking(source: ByteSource, { movi, prefix, cut }: Found, signal?: AbortSignal): Promise<AviFrames> {
  const frames: AviFrames = { offsets: [], sizes: [], cut }
  let chunks = 0
  for (const { start, end } of movi) {
    for (let at = start + 4; at + 8 <= end;) {
      if (++chunks > 2_000_000) return frames
      const head = await viewOf(source, at, 8, signal)
      const id = fourcc(head, 0)
      const bytes = head.getUint32(4, true)
      if (id === 'LIST') {
        at += 12
        continue
      }
      if (at + 8 + bytes > source.size) {
        frames.cut = true
        break
      }
      if (id === `${prefix}db` || id === `${prefix}dc`) push(frames, at + 8, bytes)
      at += 8 + bytes + bytes % 2
    }
  }
  return frames
}
