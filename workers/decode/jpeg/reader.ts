/** One JPEG file as one frame (ISO/IEC 10918-1, baseline and progressive, 8 bits), unpacked by jpeg-js under our caps. */
import type { CaptureOverrides } from '../../../shared/schemas/capture'
import type { ByteSource } from '../../source/types'
import { captureFacts, trouble } from '../facts'
import { checkFrameSize } from '../limits'
import { CaptureError, type FrameReader } from '../types'

interface JpegHead { width: number, height: number, planes: 1 | 3 }

const MAX_FILE_BYTES = 256 * 1024 * 1024
/** The unpacker keeps coefficients and pixels of all colours; larger frames would not fit beside the rest of the bench. */
const MAX_PIXELS = 60_000_000
const MAX_MEMORY_MB = 1024
/** A progressive file has some ten scans; each costs the time of a whole picture. */
const MAX_SCANS = 64
const MAX_SEGMENTS = 1000

/** Finds the frame header by walking the marker segments, which are skipped unread. */
async function readHead(name: string, source: ByteSource, signal?: AbortSignal): Promise<JpegHead> {
  const truncated = () => new CaptureError('truncated', `${name} ends within its header. Copy it again from the card.`)
  const damaged = (what: string) => new CaptureError('damaged', `${name} is a damaged JPEG file: ${what}. Copy it again.`)
  let at = 2
  for (let segment = 0; segment < MAX_SEGMENTS; segment++) {
    if (at + 4 > source.size) throw truncated()
    const bytes = await source.read(at, Math.min(19, source.size - at), signal)
    if (bytes[0] !== 0xff) throw damaged('its segments do not follow one another')
    const marker = bytes[1]!
    if (marker === 0xff) {
      at++
      continue
    }
    const length = (bytes[2]! << 8) | bytes[3]!
    if (length < 2) throw damaged('a segment of it has no length')
    if (marker === 0xda || marker === 0xd9) throw damaged('its image begins before its size is said')
    // Frame headers are C0 to CF without C4 (Huffman tables), C8 and CC (arithmetic conditioning).
    if (marker >= 0xc0 && marker <= 0xcf && marker !== 0xc4 && marker !== 0xc8 && marker !== 0xcc) {
      if (bytes.byteLength < 10) throw truncated()
      if (marker > 0xc2) throw new CaptureError('unsupported-compression', `${name} is a JPEG file of a rare kind (${marker === 0xc3 ? 'lossless' : marker >= 0xc9 ? 'arithmetic coding' : 'hierarchical'}) that Lull does not read. Save it as PNG or TIFF.`)
      const [precision, components] = [bytes[4]!, bytes[9]!]
      if (precision !== 8) throw new CaptureError('unsupported-depth', `${name} is a JPEG file of ${precision} bits; Lull reads those of 8. Save it as PNG or TIFF.`)
      if (components !== 1 && components !== 3) throw new CaptureError('unsupported-depth', `${name} is a JPEG file of ${components} colours${components === 4 ? ' (CMYK)' : ''}; Lull reads grey and RGB. Save it as PNG or TIFF.`)
      const head: JpegHead = { height: (bytes[5]! << 8) | bytes[6]!, width: (bytes[7]! << 8) | bytes[8]!, planes: components }
      checkFrameSize(name, head.width, head.height, head.planes)
      if (head.width * head.height > MAX_PIXELS) throw new CaptureError('too-large', `${name} has ${head.width} × ${head.height} pixels; JPEG frames are read up to ${MAX_PIXELS / 1e6} million. Record a smaller region of the detector.`)
      return head
    }
    at += 2 + length
  }
  throw damaged('it has far too many segments')
}

export async function openJpeg(name: string, source: ByteSource, fingerprint: string, overrides: CaptureOverrides, signal?: AbortSignal, headOnly = false): Promise<FrameReader> {
  if (source.size > MAX_FILE_BYTES) throw new CaptureError('too-large', `${name} has ${(source.size / 1e6).toFixed(0)} MB; a JPEG frame of more than ${MAX_FILE_BYTES / 1048576} MB is not read.`)
  const head = await readHead(name, source, signal)
  const { width, height, planes } = head
  const unpack = async (at?: AbortSignal) => pixelsOf(name, await source.read(0, source.size, at), head)
  // A file of its own is unpacked at once, so that damage is told when it is opened.
  let ready = headOnly ? null : await unpack(signal)
  const facts = captureFacts({
    name, format: 'jpeg', fileCount: 1, sizeBytes: source.size, fingerprint, width, height, frameCount: 1, declaredFrameCount: 1, planes,
    sampleKind: 'uint8', bitDepth: 8, saturation: 255, byteOrder: { value: 'big', decidedBy: 'format' },
    notes: [trouble('lossy', 'JPEG loses detail and keeps 8 bits, and most cameras bend the brightness besides. Pictures can be stacked; brightness differences, faint companions and noise figures measured here are not to be trusted.')],
  }, overrides)
  return {
    facts,
    seconds: null,
    async readFrames(_first, _count, readSignal) {
      const samples = ready ?? await unpack(readSignal)
      ready = null
      return { first: 0, count: 1, samples }
    },
    close() {
      ready = null
    },
  }
}

async function pixelsOf(name: string, bytes: Uint8Array<ArrayBuffer>, { width, height, planes }: JpegHead): Promise<Uint8Array<ArrayBuffer>> {
  let scans = 0
  let end = -1
  for (let i = bytes.indexOf(0xff); i >= 0 && i + 1 < bytes.length; i = bytes.indexOf(0xff, i + 1)) {
    if (bytes[i + 1] === 0xda) scans++
    else if (bytes[i + 1] === 0xd9) end = i
  }
  // The unpacker would fill what is missing with grey.
  if (end < 0 || scans === 0) throw new CaptureError('truncated', `${name} ends before its last row. Copy it again from the card, or take it out of the folder.`)
  if (scans > MAX_SCANS) throw new CaptureError('damaged', `${name} is a damaged JPEG file: it has ${scans.toLocaleString('en')} scans. Copy it again.`)
  const { decode } = await import('jpeg-js')
  let image: { width: number, height: number, data: Uint8Array }
  try {
    image = decode(bytes, { useTArray: true, formatAsRGBA: false, tolerantDecoding: false, maxResolutionInMP: MAX_PIXELS / 1e6, maxMemoryUsageInMB: MAX_MEMORY_MB })
  }
  catch (cause) {
    throw Object.assign(new CaptureError('damaged', `${name} is a damaged JPEG file: its image cannot be unpacked. Copy it again, or take it out of the folder.`), { cause })
  }
  const pixels = width * height
  if (image.width !== width || image.height !== height || image.data.length !== 3 * pixels) throw new CaptureError('damaged', `${name} is a damaged JPEG file: it holds an image of another size than it says. Copy it again.`)
  const out = new Uint8Array(planes * pixels)
  for (let p = 0; p < planes; p++) for (let i = 0; i < pixels; i++) out[p * pixels + i] = image.data[3 * i + p]!
  return out
}
