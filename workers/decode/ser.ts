/**
 * SER, version 3 (published description by H. Wilkens and G. Hahn, 2014): a header of 178 bytes, frames one
 * after another, and an optional trailer with a time for each frame.
 *
 * A file is recognised by header fields that agree with its size; the identifier text is not looked at. The
 * byte-order flag is used the opposite way round by many writers, so the order is decided by content.
 */
import type { CaptureNote, CaptureOverrides, MosaicPattern } from '../../shared/schemas/capture'
import type { ByteSource } from '../source/types'
import { deinterleave, fieldText, machineIsLittleEndian, swap16 } from './bytes'
import { decideDepth, type DepthDecision } from './depth'
import { captureFacts, info, timeNotes, trouble } from './facts'
import { checkFrameSize } from './limits'
import { summariseTimes, unixMsOfTicks } from './times'
import { CaptureError, type FrameBlock, type FrameReader, type Samples } from './types'

export const SER_HEADER_BYTES = 178

const mosaics: Record<number, MosaicPattern> = { 8: 'RGGB', 9: 'GRBG', 10: 'GBRG', 11: 'BGGR' }
const knownColours = new Set([0, 8, 9, 10, 11, 16, 17, 18, 19, 100, 101])

export interface SerHeader {
  colour: number
  littleEndianFlag: number
  width: number
  height: number
  depth: number
  frameCount: number
  observer: string
  instrument: string
  telescope: string
  utcTicks: bigint
}

/** Reads the header fields; null where they cannot be those of this format. */
export function readSerHeader(head: Uint8Array): SerHeader | null {
  if (head.byteLength < SER_HEADER_BYTES) return null
  const view = new DataView(head.buffer, head.byteOffset, SER_HEADER_BYTES)
  const header: SerHeader = {
    colour: view.getInt32(18, true),
    littleEndianFlag: view.getInt32(22, true),
    width: view.getInt32(26, true),
    height: view.getInt32(30, true),
    depth: view.getInt32(34, true),
    frameCount: view.getInt32(38, true),
    observer: fieldText(head.subarray(42, 82)),
    instrument: fieldText(head.subarray(82, 122)),
    telescope: fieldText(head.subarray(122, 162)),
    utcTicks: view.getBigInt64(170, true),
  }
  return knownColours.has(header.colour) ? header : null
}

/** Whether a header and a size can belong together: the sure test for a file whose name does not say what it is. */
export function serAgrees(header: SerHeader, size: number): boolean {
  const { width, height, depth, frameCount } = header
  if (width < 1 || height < 1 || width > 65_536 || height > 65_536 || depth < 1 || depth > 16 || frameCount < 1) return false
  const body = size - SER_HEADER_BYTES - frameCount * frameBytesOf(header)
  return body === 0 || body === 8 * frameCount
}

const planesOf = (header: SerHeader): 1 | 3 => (header.colour >= 100 ? 3 : 1)
const frameBytesOf = (header: SerHeader) => header.width * header.height * planesOf(header) * (header.depth > 8 ? 2 : 1)

/** Opens a capture whose only file is `source`. */
export async function openSer(name: string, source: ByteSource, fingerprint: string, overrides: CaptureOverrides, signal?: AbortSignal): Promise<FrameReader> {
  if (source.size < SER_HEADER_BYTES) throw new CaptureError('truncated', `${name} ends within its header (${source.size} of ${SER_HEADER_BYTES} bytes). Copy it again from the card.`)
  const header = readSerHeader(await source.read(0, SER_HEADER_BYTES, signal))
  if (!header) throw new CaptureError('damaged', `${name} is named like a SER file, but its header does not describe frames. It is damaged or of another kind; copy it again from the card.`)
  const planes = planesOf(header)
  checkFrameSize(name, header.width, header.height, planes)
  if (header.depth < 1 || header.depth > 16) throw new CaptureError('unsupported-depth', `${name} says it has ${header.depth} bits a sample; SER holds 1 to 16. The header is damaged, or the recording program wrote a variant that Lull cannot read.`)
  const notes: CaptureNote[] = []
  const frameCount = countFrames(name, source.size, header, notes)
  const pixels = header.width * header.height
  const frameBytes = frameBytesOf(header)
  const wide = header.depth > 8

  let decision: DepthDecision = { order: 'little', decidedBy: 'format', shift: 0, depth: header.depth, saturation: 2 ** header.depth - 1 }
  if (wide) {
    const sampled: Uint8Array<ArrayBuffer>[] = []
    for (const index of [...new Set([0, 1, 2, 3, 4].map(i => Math.floor(i * (frameCount - 1) / 4)))]) {
      // A middle part of the frame is enough, whatever the frame's size.
      const rows = Math.max(1, Math.min(header.height, Math.floor(1_000_000 / (header.width * planes))))
      const offset = SER_HEADER_BYTES + index * frameBytes + Math.floor((header.height - rows) / 2) * header.width * planes * 2
      sampled.push(await source.read(offset, rows * header.width * planes * 2, signal))
    }
    decision = decideDepth(sampled, header.depth, header.width * planes, planes, overrides.byteOrder)
    if (decision.note) notes.push(decision.note)
  }
  if (header.colour >= 16 && header.colour < 100) notes.push(trouble('mosaic', 'This capture has a cyan, magenta and yellow mosaic, for which Lull has no colours; it is worked on as brightness only.'))

  const { times, seconds } = await readTimes(source, header, frameCount, frameBytes, notes, signal)
  const facts = captureFacts({
    name, format: 'ser', fileCount: 1, sizeBytes: source.size, fingerprint,
    width: header.width, height: header.height, frameCount, declaredFrameCount: Math.max(0, header.frameCount),
    planes, mosaic: mosaics[header.colour] ?? 'none', sampleKind: wide ? 'uint16' : 'uint8', bitDepth: decision.depth, saturation: decision.saturation,
    byteOrder: { value: decision.order, decidedBy: decision.decidedBy }, times,
    observer: header.observer, instrument: header.instrument, telescope: header.telescope,
    notes: [...notes, ...timeNotes({ times, frameCount })],
  }, overrides)
  const mustSwap = (decision.order === 'little') !== machineIsLittleEndian
  const order = header.colour === 101 ? [2, 1, 0] as const : [0, 1, 2] as const

  return {
    facts,
    seconds,
    async readFrames(first, count, readSignal): Promise<FrameBlock> {
      const bytes = await source.read(SER_HEADER_BYTES + first * frameBytes, count * frameBytes, readSignal)
      let samples: Samples = bytes
      if (wide) {
        const words = new Uint16Array(bytes.buffer, bytes.byteOffset, bytes.byteLength / 2)
        if (mustSwap) swap16(words)
        if (decision.shift > 0) for (let i = 0; i < words.length; i++) words[i] = words[i]! >> decision.shift
        samples = words
      }
      if (planes === 3) {
        const planar = wide ? new Uint16Array(samples.length) : new Uint8Array(samples.length)
        for (let i = 0; i < count; i++) deinterleave(samples as Uint16Array, i * pixels * 3, planar as Uint16Array, i * pixels * 3, pixels, 3, order)
        samples = planar
      }
      return { first, count, samples }
    },
    close() {},
  }
}

/** Whole frames that are there; what does not agree with the header becomes a note. */
function countFrames(name: string, size: number, header: SerHeader, notes: CaptureNote[]): number {
  const frameBytes = frameBytesOf(header)
  const body = size - SER_HEADER_BYTES
  const whole = Math.floor(body / frameBytes)
  const declared = header.frameCount
  if (whole === 0) {
    if (body === 0) throw new CaptureError('no-frames', `${name} has a header and no frames. The recording was stopped before its first frame; nothing can be made of it.`)
    throw new CaptureError('truncated', `${name} ends within its first frame, so there is no whole frame in it. Copy it again from the card.`)
  }
  if (declared <= 0) {
    notes.push(trouble('frame-count', `The header does not say how many frames there are; the file holds ${whole.toLocaleString('en')} whole frames, and all are used. The recording program probably ended early.`))
    return whole
  }
  if (whole < declared) {
    notes.push(trouble('truncated', `The file ends early: ${whole.toLocaleString('en')} whole frames of the ${declared.toLocaleString('en')} that its header declares. Those ${whole.toLocaleString('en')} are used.`))
    return whole
  }
  const rest = body - declared * frameBytes
  if (rest > 0 && rest < Math.min(frameBytes, 8 * declared)) {
    notes.push(trouble('times', `The file ends within the times of its frames: ${Math.floor(rest / 8).toLocaleString('en')} of ${declared.toLocaleString('en')} are there. All frames are whole; they are taken as evenly spaced.`))
  }
  else if (rest !== 0 && rest !== 8 * declared) {
    notes.push(trouble('frame-count', `The header declares ${declared.toLocaleString('en')} frames, but the size of the file does not agree: ${rest.toLocaleString('en')} bytes are left over, room for ${(whole - declared).toLocaleString('en')} more frames. The declared frames are used.`))
  }
  return declared
}

async function readTimes(source: ByteSource, header: SerHeader, frameCount: number, frameBytes: number, notes: CaptureNote[], signal?: AbortSignal) {
  const offset = SER_HEADER_BYTES + header.frameCount * frameBytes
  const headerMs = unixMsOfTicks(header.utcTicks)
  if (frameCount === header.frameCount && source.size === offset + 8 * header.frameCount) {
    const bytes = await source.read(offset, 8 * header.frameCount, signal)
    const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength)
    const unixMs = new Float64Array(frameCount)
    let bad = 0
    for (let i = 0; i < frameCount; i++) {
      const ms = unixMsOfTicks(view.getBigInt64(8 * i, true))
      if (ms === null) bad++
      else unixMs[i] = ms
    }
    if (bad === 0) return summariseTimes(unixMs, 'trailer')
    if (bad < frameCount) notes.push(trouble('times', `${bad.toLocaleString('en')} of the frame times cannot be times; none is used, and frames are taken as evenly spaced.`))
    else notes.push(info('times', 'The file has room for a time of each frame, but the times are not filled in.'))
  }
  const none = { start: headerMs === null ? null : new Date(headerMs).toISOString(), end: null, source: headerMs === null ? 'none' as const : 'header' as const, medianIntervalMs: null, droppedFrames: 0, disordered: false }
  return { times: none, seconds: null }
}
