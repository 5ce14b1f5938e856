/** Many files of one frame each, in the natural order of their names. */
import type { CaptureOverrides } from '../../shared/schemas/capture'
import type { ByteSource } from '../source/types'
import { captureFacts, info, timeNotes } from './facts'
import { summariseTimes } from './times'
import { CaptureError, type FrameReader, type Samples } from './types'

export type OpenOne = (name: string, source: ByteSource, fingerprint: string, overrides: CaptureOverrides, signal?: AbortSignal) => Promise<FrameReader>

/** So many headers are looked at while opening; the rest is checked when it is read. */
const CHECKED_AT_OPEN = 400

const mixed = (name: string, first: FrameReader['facts'], other: FrameReader['facts']) => new CaptureError('mixed-sizes',
  `The files of ${name} do not belong together: ${first.name} has ${first.width} × ${first.height} pixels in ${first.planes === 3 ? 'colour' : 'one plane'} (${first.sampleKind}), ${other.name} has ${other.width} × ${other.height} in ${other.planes === 3 ? 'colour' : 'one plane'} (${other.sampleKind}). Put the files of one recording alone into a folder.`)

/** Opens a sequence with the opener of one of its files. `sources` are sorted. */
export async function openSequence(name: string, sources: ByteSource[], fingerprint: string, overrides: CaptureOverrides, openOne: OpenOne, signal?: AbortSignal): Promise<FrameReader> {
  const openAt = (index: number) => openOne(sources[index]!.name, sources[index]!, fingerprint, overrides, signal)
  const first = await openAt(0)
  const base = first.facts
  const belongs = (facts: FrameReader['facts']) => facts.width === base.width && facts.height === base.height && facts.planes === base.planes && facts.sampleKind === base.sampleKind && facts.frameCount === base.frameCount
  const step = Math.max(1, Math.ceil(sources.length / CHECKED_AT_OPEN))
  const starts = new Float64Array(sources.length)
  let haveTimes = step === 1
  for (let i = 0; i < sources.length; i += step) {
    const reader = i === 0 ? first : await openAt(i)
    if (!belongs(reader.facts)) throw mixed(name, base, reader.facts)
    const start = reader.facts.times.start
    if (start === null) haveTimes = false
    else starts[i] = Date.parse(start)
    if (i > 0) reader.close()
  }
  const perFile = base.frameCount
  const { times, seconds } = haveTimes && perFile === 1 ? summariseTimes(starts, 'keywords') : { times: base.times, seconds: null }
  const facts = captureFacts({
    ...base, name, fileCount: sources.length, sizeBytes: sources.reduce((sum, source) => sum + source.size, 0),
    frameCount: perFile * sources.length, declaredFrameCount: perFile * sources.length, times,
    notes: [...base.notes, info('sequence', `${sources.length.toLocaleString('en')} files in the order of their names, from ${sources[0]!.name} to ${sources.at(-1)!.name}.`), ...timeNotes({ times, frameCount: sources.length })],
  }, overrides)

  return {
    facts,
    seconds,
    async readFrames(from, count, readSignal) {
      const frame = base.width * base.height * base.planes
      let samples: Samples | null = null
      for (let i = 0; i < count; i++) {
        const index = from + i
        const reader = await openOne(sources[Math.floor(index / perFile)]!.name, sources[Math.floor(index / perFile)]!, fingerprint, overrides, readSignal)
        if (!belongs(reader.facts)) throw mixed(name, base, reader.facts)
        const block = await reader.readFrames(index % perFile, 1, readSignal)
        reader.close()
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
