/** Many files, most often of one frame each, in the natural order of their names. */
import type { CaptureOverrides } from '../../shared/schemas/capture'
import type { ByteSource } from '../source/types'
import { captureFacts, info, timeNotes } from './facts'
import { summariseTimes } from './times'
import { CaptureError, type FrameReader, type Samples } from './types'

/**
 * Opens one file. With `headOnly` (one of many files) nothing but the header is read while opening: what would be
 * found in the samples is found when they are read.
 */
export type OpenOne = (name: string, source: ByteSource, fingerprint: string, overrides: CaptureOverrides, signal?: AbortSignal, headOnly?: boolean) => Promise<FrameReader>

/** So many headers, spread over the files, are looked at while opening; the rest is checked when it is read. */
const CHECKED_AT_OPEN = 64
/** Headers that are read at once. */
const AT_ONCE = 8

const mixed = (name: string, first: FrameReader['facts'], other: FrameReader['facts']) => new CaptureError('mixed-sizes',
  `The files of ${name} do not belong together: ${first.name} has ${first.width} × ${first.height} pixels in ${first.planes === 3 ? 'colour' : 'one plane'} (${first.sampleKind}), ${other.name} has ${other.width} × ${other.height} in ${other.planes === 3 ? 'colour' : 'one plane'} (${other.sampleKind}). Put the files of one recording alone into a folder.`)

/** Opens a sequence with the opener of one of its files. `sources` are sorted. */
export async function openSequence(name: string, sources: ByteSource[], fingerprint: string, overrides: CaptureOverrides, openOne: OpenOne, signal?: AbortSignal): Promise<FrameReader> {
  const openAt = (index: number, at?: AbortSignal) => openOne(sources[index]!.name, sources[index]!, fingerprint, overrides, at, true)
  const first = await openOne(sources[0]!.name, sources[0]!, fingerprint, overrides, signal)
  const base = first.facts
  const belongs = (facts: FrameReader['facts']) => facts.width === base.width && facts.height === base.height && facts.planes === base.planes && facts.sampleKind === base.sampleKind && facts.frameCount === base.frameCount
  // A time of each frame stands in each file's header; without times a sample of the headers is enough.
  const timed = base.times.start !== null && base.times.source === 'keywords' && base.frameCount === 1
  const step = timed ? 1 : Math.max(1, Math.ceil(sources.length / CHECKED_AT_OPEN))
  const starts = new Float64Array(sources.length)
  let untimed = 0
  const look = async (index: number) => {
    const reader = index === 0 ? first : await openAt(index, signal)
    if (!belongs(reader.facts)) throw mixed(name, base, reader.facts)
    const start = reader.facts.times.start
    if (start === null) untimed++
    else starts[index] = Date.parse(start)
    if (index > 0) reader.close()
  }
  for (let i = 0; i < sources.length; i += step * AT_ONCE) {
    await Promise.all(Array.from({ length: AT_ONCE }, (_, k) => i + k * step).filter(index => index < sources.length).map(look))
  }
  const perFile = base.frameCount
  const { times, seconds } = timed && untimed === 0 ? summariseTimes(starts, 'keywords') : { times: base.times, seconds: null }
  const notes = [...base.notes, info('sequence', `${sources.length.toLocaleString('en')} files in the order of their names, from ${sources[0]!.name} to ${sources.at(-1)!.name}.`), ...timeNotes({ times, frameCount: sources.length })]
  if (timed && untimed > 0) notes.push(info('times', `${untimed.toLocaleString('en')} of the files do not say when they were taken; no times are used, and frames are taken as evenly spaced.`))
  const facts = captureFacts({
    ...base, name, fileCount: sources.length, sizeBytes: sources.reduce((sum, source) => sum + source.size, 0),
    frameCount: perFile * sources.length, declaredFrameCount: perFile * sources.length, times, notes,
  }, overrides)

  return {
    facts,
    seconds,
    async readFrames(from, count, readSignal) {
      const frame = base.width * base.height * base.planes
      let samples: Samples | null = null
      for (let i = 0; i < count; i++) {
        const index = from + i
        const reader = await openAt(Math.floor(index / perFile), readSignal)
        if (!belongs(reader.facts)) throw mixed(name, base, reader.facts)
        const block = await reader.readFrames(index % perFile, 1, readSignal)
        reader.close()
        if (count === 1) return { first: from, count, samples: block.samples }
        samples ??= new (block.samples.constructor as new (n: number) => Samples)(frame * count)
        samples.set(block.samples as never, i * frame)
      }
      return { first: from, count, samples: samples! }
    },
    close() {
      first.close()
    },
  }
}
