/** A FITS cube, or one image of a sequence, as frames. */
import type { CaptureOverrides } from '../../../shared/schemas/capture'
import type { ByteSource } from '../../source/types'
import { captureFacts, timeNotes, trouble } from '../facts'
import { noTimes } from '../times'
import { CaptureError, type FrameReader } from '../types'
import type { FitsImage } from './image'
import { factsOfCards, readFitsImage, startOfCards } from './image'
import { decodeSamples, flipRows, sampleKindOf } from './samples'

/** Opens a FITS file; a file of a sequence is opened the same way and holds one frame. */
export async function openFits(name: string, source: ByteSource, fingerprint: string, overrides: CaptureOverrides, signal?: AbortSignal): Promise<FrameReader> {
  const image = await readFitsImage(source, signal)
  const { width, height, planes, format } = image
  const kind = sampleKindOf(format)
  const frameSamples = width * height * planes
  const frameBytes = frameSamples * Math.abs(format.bitpix) / 8
  const whole = Math.floor((source.size - image.dataOffset) / frameBytes)
  const frameCount = Math.min(whole, image.declared)
  const notes = [...image.notes]
  if (frameCount < 1) throw new CaptureError('truncated', `${name} ends within its first frame, so there is no whole frame in it. Copy it again from the card.`)
  if (frameCount < image.declared) notes.push(trouble('truncated', `The file ends early: ${frameCount.toLocaleString('en')} whole frames of the ${image.declared.toLocaleString('en')} that its header declares. Those ${frameCount.toLocaleString('en')} are used.`))
  const read = frameDecoder(source, image)
  const { missing } = await read(0, 1, signal)
  if (missing > 0) notes.push(trouble('missing', `${missing.toLocaleString('en')} pixels of the first frame have no value (BLANK or not a number); such pixels are taken as zero.`))

  const start = startOfCards(image.cards)
  const exact = factsOfCards(image.cards)
  const facts = captureFacts({
    name, format: 'fits', fileCount: 1, sizeBytes: source.size, fingerprint, width, height, frameCount, declaredFrameCount: image.declared, planes,
    sampleKind: kind, bitDepth: kind === 'float32' ? 32 : kind === 'uint16' ? 16 : 8, byteOrder: { value: 'big', decidedBy: 'format' },
    ...exact,
    saturation: exact.saturation ?? (kind === 'uint16' ? 65_535 : kind === 'uint8' ? 255 : null),
    times: start === null ? noTimes : { ...noTimes, start: new Date(start).toISOString(), source: 'keywords' },
    notes: [...notes, ...timeNotes({ times: noTimes, frameCount })],
  }, overrides)
  return {
    facts,
    seconds: null,
    async readFrames(first, count, readSignal) {
      return { first, count, samples: (await read(first, count, readSignal)).samples }
    },
    close() {},
  }
}

function frameDecoder(source: ByteSource, image: FitsImage) {
  const frameBytes = image.width * image.height * image.planes * Math.abs(image.format.bitpix) / 8
  return async (first: number, count: number, signal?: AbortSignal) => {
    const bytes = await source.read(image.dataOffset + first * frameBytes, count * frameBytes, signal)
    const decoded = decodeSamples(bytes, image.format)
    if (!image.topDown) flipRows(decoded.samples, image.width, image.height)
    return decoded
  }
}
