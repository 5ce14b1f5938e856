/** One PNG file as one frame. */
import type { CaptureOverrides } from '../../../shared/schemas/capture'
import type { ByteSource } from '../../source/types'
import { captureFacts, info } from '../facts'
import { inflateCapped } from '../inflate'
import { CaptureError, type FrameReader, type Samples } from '../types'
import { PNG_HEAD_BYTES, readPng, readPngHead, samplesPerPixel, type PngInfo } from './chunks'
import { inflatedBytes, unpackRows } from './unfilter'

/** A PNG file larger than this is no frame of a recording. */
const MAX_FILE_BYTES = 1 << 30

export async function openPng(name: string, source: ByteSource, fingerprint: string, overrides: CaptureOverrides, signal?: AbortSignal, headOnly = false): Promise<FrameReader> {
  if (source.size > MAX_FILE_BYTES) throw new CaptureError('too-large', `${name} has ${(source.size / 1e9).toFixed(1)} GB; a PNG frame of more than 1 GB is not read.`)
  const readWhole = async (readSignal?: AbortSignal) => readPng(name, await source.read(0, source.size, readSignal))
  // A file of its own is read at once, so that damage is told when it is opened.
  const whole = headOnly ? null : await readWhole(signal)
  const png = whole ?? readPngHead(name, await source.read(0, Math.min(PNG_HEAD_BYTES, source.size), signal))
  const planes = png.colourType === 2 || png.colourType === 6 || png.colourType === 3 ? 3 : 1
  const notes = []
  if (png.colourType >= 4) notes.push(info('alpha', 'The transparency of the frames is ignored.'))
  if (png.colourType === 3) notes.push(info('palette', 'The frames have a palette; its colours are used.'))
  const bitDepth = png.colourType === 3 ? 8 : png.bitDepth
  const facts = captureFacts({
    name, format: 'png', fileCount: 1, sizeBytes: source.size, fingerprint, width: png.width, height: png.height, frameCount: 1, declaredFrameCount: 1, planes,
    sampleKind: bitDepth === 16 ? 'uint16' : 'uint8', bitDepth, saturation: 2 ** bitDepth - 1, byteOrder: { value: 'big', decidedBy: 'format' }, notes,
  }, overrides)
  return {
    facts,
    seconds: null,
    async readFrames(_first, _count, readSignal) {
      return { first: 0, count: 1, samples: await pixelsOf(name, whole ?? await readWhole(readSignal), planes) }
    },
    close() {},
  }
}

async function pixelsOf(name: string, png: PngInfo, planes: 1 | 3): Promise<Samples> {
  const { width, height, bitDepth, colourType, interlaced, palette } = png
  const channels = samplesPerPixel[colourType]!
  const wanted = inflatedBytes(width, height, bitDepth * channels, interlaced)
  // Deflate makes at most 1032 bytes of one: a file that claims more is refused before anything is allocated.
  if (wanted > 1032 * png.data.byteLength) throw new CaptureError('truncated', `${name} ends before its last row. Copy it again from the card, or take it out of the folder.`)
  const raw = await inflateCapped(png.data, wanted)
  if (!raw || raw.byteLength < wanted) throw new CaptureError('truncated', `${name} ends before its last row. Copy it again from the card, or take it out of the folder.`)
  const samples = unpackRows(raw, width, height, bitDepth, channels, interlaced)
  if (!samples) throw new CaptureError('damaged', `${name} is a damaged PNG file: its rows cannot be unpacked. Copy it again.`)
  const pixels = width * height
  const out = colourType !== 3 && bitDepth === 16 ? new Uint16Array(pixels * planes) : new Uint8Array(pixels * planes)
  for (let i = 0; i < pixels; i++) {
    for (let p = 0; p < planes; p++) out[p * pixels + i] = colourType === 3 ? palette![3 * samples[i]! + p] ?? 0 : samples[i * channels + p]!
  }
  return out
}
