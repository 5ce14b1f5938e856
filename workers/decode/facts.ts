/** Puts the facts of a capture together: what the format said, defaults, and the user's corrections. */
import type { CaptureFacts, CaptureNote, CaptureOverrides } from '../../shared/schemas/capture'
import { noTimes } from './times'

/** What a decoder must say; the rest has defaults. */
export type KnownFacts = Pick<CaptureFacts, 'name' | 'format' | 'fileCount' | 'sizeBytes' | 'fingerprint' | 'width' | 'height' | 'frameCount' | 'declaredFrameCount' | 'planes' | 'sampleKind' | 'bitDepth' | 'byteOrder'>
  & Partial<CaptureFacts>

/** The facts, corrected. A correction of the byte order is the decoder's to carry out; it is only recorded here. */
export function captureFacts(known: KnownFacts, overrides: CaptureOverrides): CaptureFacts {
  const facts: CaptureFacts = {
    mosaic: 'none', saturation: null, times: noTimes, exposureMs: null,
    observer: '', instrument: '', telescope: '', object: '', filter: '',
    apertureMm: null, focalLengthMm: null, pixelSizeUm: null, notes: [],
    ...known,
  }
  const { byteOrder, start, mosaic, ...plain } = overrides
  Object.assign(facts, Object.fromEntries(Object.entries(plain).filter(([, value]) => value !== undefined)))
  if (mosaic !== undefined && facts.planes === 1) facts.mosaic = mosaic
  if (byteOrder !== undefined && facts.byteOrder.decidedBy !== 'format') facts.byteOrder = { value: byteOrder, decidedBy: 'user' }
  if (start !== undefined) facts.times = { ...facts.times, start, source: 'user' }
  return facts
}

export function info(code: string, text: string): CaptureNote {
  return { code, level: 'info', text }
}

export function trouble(code: string, text: string): CaptureNote {
  return { code, level: 'trouble', text }
}

/** Notes that any format may have about its times. */
export function timeNotes(facts: Pick<CaptureFacts, 'times' | 'frameCount'>): CaptureNote[] {
  const notes: CaptureNote[] = []
  const { droppedFrames, disordered } = facts.times
  if (disordered) notes.push(trouble('disordered', 'The times of the frames are not in ascending order; the recording program or the clock jumped.'))
  if (droppedFrames > 0) notes.push(trouble('dropped', `${droppedFrames.toLocaleString('en')} ${droppedFrames === 1 ? 'frame was' : 'frames were'} dropped while recording: the times have gaps.`))
  return notes
}
