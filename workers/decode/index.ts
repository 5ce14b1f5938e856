/**
 * From files to frames: finds out what a capture is, by its content, and opens it.
 *
 * A decoder is one entry of `decoders`; see DEVELOPERS.md, "A new decoder".
 */
import type { CaptureOverrides } from '../../shared/schemas/capture'
import { fingerprintOf } from '../source/fingerprint'
import { extensionOf, naturalCompare } from '../source/names'
import type { ByteSource } from '../source/types'
import { decoders, type Decoder } from './registry'
import { info } from './facts'
import { openSequence } from './sequence'
import { CaptureError, type FrameReader } from './types'

const HEAD_BYTES = 512
const known = 'SER, FITS, TIFF, PNG, JPEG and AVI without compression'

/** Files beside a recording that are no frames: system files, notes, settings. */
function foreign(path: string): boolean {
  const name = path.slice(path.lastIndexOf('/') + 1)
  return name.startsWith('.') || /^(thumbs\.db|desktop\.ini)$/i.test(name) || /^(txt|log|json|csv|md|ini|pdf|db|xml|html?)$/.test(extensionOf(name))
}

/** The files of a folder that can be frames: those with a name that a decoder goes by, where there are any. */
function frameFiles(sources: ByteSource[]): ByteSource[] {
  if (sources.length === 1) return sources
  const own = sources.filter(source => !foreign(source.name))
  const named = own.filter(source => decoders.some(decoder => decoder.extensions.includes(extensionOf(source.name))))
  return named.length > 0 ? named : own
}

async function decoderOf(source: ByteSource, signal?: AbortSignal): Promise<Decoder | null> {
  const head = await source.read(0, Math.min(HEAD_BYTES, source.size), signal)
  return decoders.find(decoder => decoder.recognise(head, source.size)) ?? null
}

/**
 * Opens a capture: one file, or the files of a folder in any order.
 *
 * @throws CaptureError with a code and a text for the user, for whatever cannot be read
 */
export async function openCapture(name: string, sources: ByteSource[], overrides: CaptureOverrides = {}, signal?: AbortSignal): Promise<FrameReader> {
  const candidates = frameFiles(sources)
  const ignored = sources.length - candidates.length
  if (candidates.length === 0) throw new CaptureError('no-frames', `There are no frames in ${name}. Lull reads ${known}: a file, or a folder of frame files.`)
  candidates.sort((a, b) => naturalCompare(a.name, b.name))
  const first = candidates[0]!
  const blank = candidates.find(source => source.size === 0)
  if (blank) throw new CaptureError('empty', `${blank.name} is empty (0 bytes). The recording or the copy failed; copy it again from the card${candidates.length > 1 ? ', or take the empty file out of the folder' : ''}.`)

  const decoder = await decoderOf(first, signal) ?? namedDecoder(first)
  if (!decoder) throw new CaptureError('unknown-format', `${first.name} is not of a kind that Lull reads. It reads ${known}.`)
  const fingerprint = await fingerprintOf(candidates, signal)
  let reader: FrameReader
  if (candidates.length === 1) reader = await decoder.open(name, first, fingerprint, overrides, signal)
  else {
    for (const source of [candidates[1]!, candidates.at(-1)!]) {
      const other = await decoderOf(source, signal)
      if (other?.format !== decoder.format) throw new CaptureError('mixed-sizes', `The files of ${name} are of different kinds: ${first.name} is ${decoder.label}, ${source.name} is ${other?.label ?? 'something else'}. Put the files of one recording alone into a folder.`)
    }
    reader = await openSequence(name, candidates, fingerprint, overrides, decoder.open, signal)
  }
  const extension = extensionOf(first.name)
  if (extension && !decoder.extensions.includes(extension)) reader.facts.notes.push(info('extension', `The name ends in .${extension}, but the content is ${decoder.label}; it is read as ${decoder.label}.`))
  if (ignored > 0) reader.facts.notes.push(info('ignored', `${ignored === 1 ? 'One file' : `${ignored} files`} in the folder ${ignored === 1 ? 'is no frame and was' : 'are no frames and were'} left out: ${leftOut(sources, candidates)}.`))
  return reader
}

/** Names of what was left out, the first three of them. */
function leftOut(sources: ByteSource[], candidates: ByteSource[]): string {
  const names = sources.filter(source => !candidates.includes(source)).map(source => source.name)
  return names.length > 3 ? `${names.slice(0, 3).join(', ')} and ${names.length - 3} more` : names.join(', ')
}

/** A damaged file of a known name goes to its decoder, whose message says more than "unknown"; a wrong name is told. */
function namedDecoder(source: ByteSource): Decoder | null {
  const extension = extensionOf(source.name)
  const decoder = decoders.find(candidate => candidate.extensions.includes(extension))
  if (!decoder) return null
  if (decoder.recogniseDamaged) return decoder
  throw new CaptureError('wrong-extension', `${source.name} is named like ${decoder.label}, but its content is not. It is of another kind or damaged; copy it again, or open the file it was made from.`)
}
