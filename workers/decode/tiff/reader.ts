/** A TIFF file of one or many pages as frames. */
import type { CaptureOverrides } from '../../../shared/schemas/capture'
import type { ByteSource } from '../../source/types'
import { captureFacts, info, trouble } from '../facts'
import { checkFrameSize, MAX_FRAME_SAMPLES } from '../limits'
import { CaptureError, type FrameReader, type Samples } from '../types'
import { pageOffsets, readPage, tiffLayout, type TiffPage } from './directory'
import { kindOf, readPixels } from './pixels'
import { readableCompressions } from './unpack'

/** So many pages at the end are looked at for samples that are cut off; the chain of pages ends where the file does. */
const MOST_CUT_PAGES = 64

const compressionNames: Record<number, string> = { 2: 'CCITT', 3: 'fax', 4: 'fax', 6: 'JPEG', 7: 'JPEG', 34712: 'JPEG 2000', 34887: 'LERC', 50000: 'Zstandard', 50001: 'WebP', 34925: 'LZMA' }

const colourNames: Record<number, string> = { 4: 'a mask', 5: 'CMYK', 6: 'YCbCr', 8: 'CIE L*a*b*', 32803: 'a raw mosaic' }

function checkPage(name: string, page: TiffPage): void {
  checkFrameSize(name, page.width, page.height, Math.min(3, page.samples))
  if (!readableCompressions.has(page.compression)) {
    throw new CaptureError('unsupported-compression', `${name} is compressed with ${compressionNames[page.compression] ?? `method ${page.compression}`}, which Lull does not read${page.compression === 7 || page.compression === 6 ? ' (it also loses detail)' : ''}. Save it without compression, or with LZW, Deflate or PackBits.`)
  }
  if (page.predictor !== 1 && page.predictor !== 2) throw new CaptureError('unsupported-compression', `${name} uses TIFF predictor ${page.predictor}, which Lull does not read. Save it without compression.`)
  if (page.predictor === 2 && (page.bits < 8 || page.sampleFormat === 3)) throw new CaptureError('unsupported-compression', `${name} uses a predictor for samples of ${page.bits} bits, which Lull does not read. Save it without compression.`)
  if (!kindOf(page)) throw new CaptureError('unsupported-depth', `${name} has ${page.bits} bits a sample (${page.sampleFormat === 3 ? 'floating point' : 'integers'}); Lull reads 1, 2, 4, 8, 16 and 32 bits, and 32 or 64 bits of floating point. Save it as 16 bits.`)
  if (page.photometric > 3) throw new CaptureError('unsupported-depth', `${name} has colours of a kind (${colourNames[page.photometric] ?? page.photometric}) that Lull does not read. Save it as grey or RGB.`)
  if (page.photometric === 3 && (page.colourMap?.length ?? 0) < 3 * 2 ** page.bits) throw new CaptureError('damaged', `${name} has no palette for its colours. The TIFF file is damaged; copy it again.`)
  if (page.samples < 1 || page.samples > 16) throw new CaptureError('unsupported-depth', `${name} has ${page.samples} samples a pixel; Lull reads up to 16. Save it as grey or RGB.`)
  if ((page.tile?.width ?? page.width) * (page.tile?.height ?? page.rowsPerStrip) * page.samples > MAX_FRAME_SAMPLES) throw new CaptureError('too-large', `${name} has strips or tiles that are too large to be unpacked. Save it with smaller ones.`)
  if (page.tile && (page.tile.width < 1 || page.tile.height < 1 || page.tile.width > 65_536 || page.tile.height > 65_536)) throw new CaptureError('damaged', `${name} is a damaged TIFF file: its tiles cannot be. Copy it again.`)
  if (page.samples < 1 || page.samples > 64) throw new CaptureError('damaged', `${name} is a damaged TIFF file: it says that it has ${page.samples} samples a pixel. Copy it again.`)
  if (page.rowsPerStrip < 1) throw new CaptureError('damaged', `${name} is a damaged TIFF file: its strips cannot be. Copy it again.`)
}

export async function openTiff(name: string, source: ByteSource, fingerprint: string, overrides: CaptureOverrides, signal?: AbortSignal): Promise<FrameReader> {
  const layout = tiffLayout(await source.read(0, Math.min(16, source.size), signal))
  if (!layout) throw new CaptureError('damaged', `${name} does not begin as a TIFF file must. Copy it again.`)
  const { offsets, looped, cut } = await pageOffsets(source, layout, signal)
  if (offsets.length === 0) throw cut ? new CaptureError('truncated', `${name} ends before its first page. Copy it again from the card.`) : new CaptureError('no-frames', `${name} is a TIFF file without a page in it.`)
  const { page: first } = await readPage(source, layout, offsets[0]!, signal)
  checkPage(name, first)
  const kind = kindOf(first)!
  const planes = (first.photometric === 2 && first.samples >= 3) || first.photometric === 3 ? 3 : 1
  const bitDepth = kind === 'float32' ? 32 : first.photometric === 3 ? 8 : first.bits
  const notes = []
  if (looped) notes.push(trouble('looped', 'The chain of pages runs in a circle; each page is used once.'))
  if (first.photometric === 3) notes.push(info('palette', 'The frames have a palette; its colours are used, with 8 bits.'))
  if (first.samples > planes) notes.push(info('alpha', `The pages have ${first.samples} samples a pixel; only ${planes === 3 ? 'red, green and blue are' : 'the first is'} used.`))
  let frameCount = offsets.length
  if (cut) notes.push(trouble('truncated', `The file ends early: ${frameCount.toLocaleString('en')} whole pages are there and are used.`))
  // The last page may be cut off in its samples.
  while (frameCount > Math.max(1, offsets.length - MOST_CUT_PAGES) && !await isWhole(source, layout, offsets[frameCount - 1]!, signal)) frameCount--
  if (frameCount < offsets.length && !cut) notes.push(trouble('truncated', `The file ends early: ${frameCount.toLocaleString('en')} whole pages of ${offsets.length.toLocaleString('en')}. Those ${frameCount.toLocaleString('en')} are used.`))
  const facts = captureFacts({
    name, format: 'tiff', fileCount: 1, sizeBytes: source.size, fingerprint, width: first.width, height: first.height, frameCount, declaredFrameCount: offsets.length, planes,
    sampleKind: kind, bitDepth, saturation: kind === 'float32' ? null : 2 ** bitDepth - 1,
    byteOrder: { value: layout.littleEndian ? 'little' : 'big', decidedBy: 'format' }, notes,
  }, overrides)

  return {
    facts,
    seconds: null,
    async readFrames(from, count, readSignal) {
      const size = first.width * first.height * planes
      let samples: Samples | null = null
      for (let i = 0; i < count; i++) {
        const { page } = await readPage(source, layout, offsets[from + i]!, readSignal)
        if (page.width !== first.width || page.height !== first.height || page.samples !== first.samples || page.photometric !== first.photometric || kindOf(page) !== kind) {
          throw new CaptureError('mixed-sizes', `The pages of ${name} do not belong together: page 1 has ${first.width} × ${first.height} pixels, page ${from + i + 1} has ${page.width} × ${page.height}. Save the frames of one recording alone.`)
        }
        checkPage(name, page)
        const frame = await readPixels(source, page, planes, kind, readSignal)
        if (count === 1) return { first: from, count, samples: frame }
        samples ??= new (frame.constructor as new (n: number) => Samples)(size * count)
        samples.set(frame as never, i * size)
      }
      return { first: from, count, samples: samples! }
    },
    close() {},
  }
}

async function isWhole(source: ByteSource, layout: Parameters<typeof readPage>[1], offset: number, signal?: AbortSignal): Promise<boolean> {
  try {
    const { page } = await readPage(source, layout, offset, signal)
    return page.offsets.every((at, i) => at + (page.byteCounts[i] ?? 0) <= source.size)
  }
  catch (error) {
    if (error instanceof CaptureError) return false
    throw error
  }
}
