/** A FITS cube, or one image of a sequence, as frames. */
import type { CaptureOverrides } from '../../../shared/schemas/capture'
import type { ByteSource } from '../../source/types'
import { captureFacts, timeNotes, trouble } from '../facts'
import { noTimes, summariseTimes } from '../times'
import { CaptureError, type FrameReader, type Samples } from '../types'
import type { FitsImages } from './image'
import { factsOfCards, readFitsImages, startOfCards } from './image'
import { decodeSamples, flipRows, sampleKindOf } from './samples'

/** Opens a FITS file; a file of a sequence is opened the same way and holds one frame. */
export async function openFits(name: string, source: ByteSource, fingerprint: string, overrides: CaptureOverrides, signal?: AbortSignal, headOnly = false): Promise<FrameReader> {
  const image = await readFitsImages(source, signal)
  const { width, height, planes, format } = image
  const kind = sampleKindOf(format)
  const frameSamples = width * height * planes
  const frameBytes = frameSamples * Math.abs(format.bitpix) / 8
  const declared = image.declared * image.parts.length
  // Only the last image can be cut off.
  const whole = (image.parts.length - 1) * image.declared + Math.floor((source.size - image.parts.at(-1)!.dataOffset) / frameBytes)
  const frameCount = Math.min(whole, declared)
  const notes = [...image.notes]
  if (frameCount < 1) throw new CaptureError('truncated', `${name} ends within its first frame, so there is no whole frame in it. Copy it again from the card.`)
  if (frameCount < declared) notes.push(trouble('truncated', `The file ends early: ${frameCount.toLocaleString('en')} whole frames of the ${declared.toLocaleString('en')} that its header declares. Those ${frameCount.toLocaleString('en')} are used.`))
  const read = frameDecoder(source, image)
  const missing = headOnly ? 0 : (await read(0, 1, signal)).missing
  if (missing > 0) notes.push(trouble('missing', `${missing.toLocaleString('en')} pixels of the first frame have no value (BLANK or not a number); such pixels are taken as zero.`))

  const start = startOfCards(image.cards)
  const starts = image.parts.slice(0, frameCount).map(part => part.startMs)
  const timed = image.declared === 1 && starts.length > 1 && starts.every(ms => ms !== null) ? summariseTimes(Float64Array.from(starts), 'keywords') : null
  const times = timed?.times ?? (start === null ? noTimes : { ...noTimes, start: new Date(start).toISOString(), source: 'keywords' as const })
  const exact = factsOfCards(image.cards)
  const facts = captureFacts({
    name, format: 'fits', fileCount: 1, sizeBytes: source.size, fingerprint, width, height, frameCount, declaredFrameCount: declared, planes,
    sampleKind: kind, bitDepth: kind === 'float32' ? 32 : kind === 'uint16' ? 16 : 8, byteOrder: { value: 'big', decidedBy: 'format' },
    ...exact,
    saturation: exact.saturation ?? (kind === 'uint16' ? 65_535 : kind === 'uint8' ? 255 : null),
    times,
    notes: [...notes, ...timeNotes({ times, frameCount })],
  }, overrides)
  return {
    facts,
    seconds: timed?.seconds ?? null,
    async readFrames(first, count, readSignal) {
      return { first, count, samples: (await read(first, count, readSignal)).samples }
    },
    close() {},
  }
}

function frameDecoder(source: ByteSource, image: FitsImages) {
  const frameBytes = image.width * image.height * image.planes * Math.abs(image.format.bitpix) / 8
  const { parts, declared } = image
  /** Frames of one image, which follow one another. */
  async function readPart(first: number, count: number, signal?: AbortSignal) {
    const bytes = await source.read(parts[Math.floor(first / declared)]!.dataOffset + (first % declared) * frameBytes, count * frameBytes, signal)
    const decoded = decodeSamples(bytes, image.format)
    if (!image.topDown) flipRows(decoded.samples, image.width, image.height)
    return decoded
  }
  return async (first: number, count: number, signal?: AbortSignal) => {
    const inFirst = Math.min(count, declared - first % declared)
    const start = await readPart(first, inFirst, signal)
    if (inFirst === count) return start
    const frameSamples = image.width * image.height * image.planes
    const samples = new (start.samples.constructor as new (n: number) => Samples)(frameSamples * count)
    samples.set(start.samples as never)
    let { missing } = start
    for (let done = inFirst; done < count;) {
      const n = Math.min(count - done, declared)
      const next = await readPart(first + done, n, signal)
      samples.set(next.samples as never, done * frameSamples)
      missing += next.missing
      done += n
    }
    return { samples, missing }
  }
}
