/** An AVI file without compression as frames: grey of 8 bits, bitmaps of 8 or 24 bits, rows in either order. */
import type { CaptureOverrides } from '../../../shared/schemas/capture'
import type { ByteSource } from '../../source/types'
import { captureFacts, info, trouble } from '../facts'
import { checkFrameSize } from '../limits'
import { CaptureError, type FrameReader } from '../types'
import { aviFrames, readAvi, type AviStream } from './chunks'

/** Codes of grey without compression. */
const grey = new Set(['Y800', 'Y8  ', 'GREY'])
const codecNames: Record<string, string> = {
  'MJPG': 'Motion JPEG', 'H264': 'H.264', 'X264': 'H.264', 'AVC1': 'H.264', 'HEVC': 'H.265', 'XVID': 'MPEG-4 (Xvid)', 'DIVX': 'MPEG-4 (DivX)', 'DX50': 'MPEG-4 (DivX)', 'FMP4': 'MPEG-4', 'MP4V': 'MPEG-4', 'MPG4': 'MPEG-4',
  'CVID': 'Cinepak', 'DVSD': 'DV', 'FFV1': 'FFV1', 'HFYU': 'HuffYUV', 'ULRG': 'Ut Video', 'LAGS': 'Lagarith', 'YUY2': 'YUY2', 'UYVY': 'UYVY', 'I420': 'I420', 'YV12': 'YV12', 'NV12': 'NV12',
}

function checkStream(name: string, { codec, bits }: AviStream): void {
  const printable = codec.replace(/[^\x20-\x7e]/g, '?').trim()
  if (codec !== '' && !grey.has(codec.toUpperCase())) {
    throw new CaptureError('unsupported-compression', `${name} holds video of the kind ${codecNames[codec.toUpperCase().padEnd(4)] ?? (printable || 'unknown')}, which Lull does not read; most such kinds lose the fine detail that stacking needs. Record without compression (SER, or AVI as Y800 or RGB24), or unpack the video to one of them with a general video tool.`)
  }
  if (bits !== 8 && bits !== 24 && codec === '') throw new CaptureError('unsupported-depth', `${name} has ${bits} bits a pixel; Lull reads AVI of 8 and 24 bits. Record it as Y800 or RGB24, or as SER.`)
}

export async function openAvi(name: string, source: ByteSource, fingerprint: string, overrides: CaptureOverrides, signal?: AbortSignal): Promise<FrameReader> {
  const found = await readAvi(source, signal)
  const { stream } = found
  if (!stream) throw new CaptureError('damaged', `${name} is an AVI file whose header describes no pictures. It is damaged or holds sound only; copy it again from the card.`)
  checkStream(name, stream)
  const { width, height, palette } = stream
  const bitmap = stream.codec === ''
  const bytesPerPixel = bitmap && stream.bits === 24 ? 3 : 1
  const shades = palette === null || palette.every((value, i) => value === palette[i - i % 3])
  const plainRamp = palette === null || palette.every((value, i) => value === Math.floor(i / 3))
  const planes = bytesPerPixel === 3 || !shades ? 3 : 1
  checkFrameSize(name, width, height, planes)

  const frames = await aviFrames(source, found, signal)
  const padded = Math.ceil(width * bytesPerPixel / 4) * 4
  // Rows of bitmaps end on four bytes; of grey codes most writers leave the padding out.
  const largest = frames.sizes.reduce((most, size) => Math.max(most, size), 0)
  const stride = !bitmap && largest < padded * height ? width : padded
  const frameBytes = stride * height
  const offsets = frames.offsets.filter((_, i) => frames.sizes[i]! >= frameBytes)
  const empty = frames.sizes.filter(size => size === 0).length
  const short = frames.sizes.length - offsets.length - empty
  if (offsets.length === 0) {
    if (frames.cut || short > 0) throw new CaptureError('truncated', `${name} ends within its first frame, so there is no whole frame in it. Copy it again from the card.`)
    throw new CaptureError('no-frames', `${name} has a header and no frames. The recording was stopped before its first frame; nothing can be made of it.`)
  }
  const count = (n: number) => n.toLocaleString('en')
  const notes = [info('times', stream.framesPerSecond === null ? 'AVI files do not say when each frame was taken; frames are taken as evenly spaced.' : `AVI files do not say when each frame was taken; the header says ${Math.round(100 * stream.framesPerSecond) / 100} frames a second.`)]
  if (frames.cut) notes.push(trouble('truncated', `The file ends early: its ${count(offsets.length)} whole frames are used.`))
  if (empty > 0) notes.push(trouble('dropped', `${count(empty)} ${empty === 1 ? 'frame was' : 'frames were'} dropped while recording: their places in the file are empty.`))
  if (short > 0) notes.push(trouble('damaged', `${count(short)} ${short === 1 ? 'frame is' : 'frames are'} shorter than the header says, and left out.`))
  if (!plainRamp) notes.push(info('palette', 'The frames have a palette; its values are used.'))
  const facts = captureFacts({
    name, format: 'avi', fileCount: 1, sizeBytes: source.size, fingerprint, width, height, frameCount: offsets.length, declaredFrameCount: frames.offsets.length,
    planes, sampleKind: 'uint8', bitDepth: 8, saturation: 255, byteOrder: { value: 'little', decidedBy: 'format' }, notes,
  }, overrides)
  // Bitmaps stand on their heads unless their height is negative; the grey codes begin at the top.
  const upward = bitmap && !stream.topDown

  return {
    facts,
    seconds: null,
    async readFrames(first, n, readSignal) {
      const pixels = width * height
      const samples = new Uint8Array(n * planes * pixels)
      for (let i = 0; i < n; i++) {
        const bytes = await source.read(offsets[first + i]!, frameBytes, readSignal)
        for (let y = 0; y < height; y++) {
          const row = (upward ? height - 1 - y : y) * stride
          const to = i * planes * pixels + y * width
          if (planes === 1 && plainRamp) samples.set(bytes.subarray(row, row + width), to)
          else {
            for (let p = 0; p < planes; p++) {
              // Bitmaps hold blue, green, red.
              for (let x = 0; x < width; x++) samples[to + p * pixels + x] = palette ? palette[3 * bytes[row + x]! + p]! : bytes[row + 3 * x + 2 - p]!
            }
          }
        }
      }
      return { first, count: n, samples }
    },
    close() {},
  }
}
