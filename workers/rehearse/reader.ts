/** A rehearsal as a capture: frames made on demand, kept where they fit. */
import { canonicalJson, sha256Hex } from '../../shared/recipe/canonical'
import type { CaptureFacts } from '../../shared/schemas/capture'
import type { FrameReader, Samples } from '../decode/types'
import { createSimulator } from './simulator'
import type { FrameTruth, RehearsalSpec } from './spec'

/** Captures up to this size stay in memory once made. */
const KEEP_BYTES = 128 * 2 ** 20

export interface RehearsalReader extends FrameReader {
  /** Truth of a frame; makes the frame if need be. */
  truth(frame: number): FrameTruth
}

export async function rehearsalReader(spec: RehearsalSpec): Promise<RehearsalReader> {
  const simulator = createSimulator(spec)
  const { width, height, frames, detector } = spec
  const pixels = width * height
  const wide = detector.bitDepth > 8
  const make = (length: number): Samples => (wide ? new Uint16Array(length) : new Uint8Array(length))
  const bytes = frames * pixels * (wide ? 2 : 1)
  let store: Samples | null = bytes <= KEEP_BYTES ? make(frames * pixels) : null
  const made = new Uint8Array(frames)
  const truths: FrameTruth[] = []
  let closed = false

  const seconds = simulator.seconds
  const startMs = Date.parse(spec.start)
  const dropped = Math.round((seconds[frames - 1]! * 1000) / spec.intervalMs) - (frames - 1)
  const facts: CaptureFacts = {
    name: spec.name, format: 'rehearsal', fileCount: 1, sizeBytes: bytes,
    fingerprint: await sha256Hex(canonicalJson(spec)),
    width, height, frameCount: frames, declaredFrameCount: frames, planes: 1, mosaic: detector.mosaic,
    sampleKind: wide ? 'uint16' : 'uint8', bitDepth: detector.bitDepth, saturation: simulator.saturation,
    byteOrder: { value: 'little', decidedBy: 'format' },
    times: {
      start: new Date(startMs).toISOString(), end: new Date(startMs + seconds[frames - 1]! * 1000).toISOString(),
      source: 'header', medianIntervalMs: frames > 1 ? spec.intervalMs : null, droppedFrames: dropped, disordered: false,
    },
    exposureMs: spec.exposureMs, observer: '', instrument: 'Simulated detector', telescope: 'Simulated telescope',
    object: spec.name, filter: `${spec.optics.wavelengthNm} nm`,
    apertureMm: spec.optics.apertureMm, focalLengthMm: spec.optics.focalLengthMm, pixelSizeUm: spec.optics.pixelSizeUm,
    notes: [{ code: 'rehearsal', level: 'info', text: 'This is a rehearsal: its frames are simulated, and the truth behind them is known.' }],
  }

  const scratch = make(pixels)
  function frameInto(frame: number, out: Samples, offset: number): void {
    if (store && made[frame]) {
      out.set(store.subarray(frame * pixels, (frame + 1) * pixels), offset)
      return
    }
    truths[frame] = simulator.render(frame, out, offset)
    if (store) {
      store.set(out.subarray(offset, offset + pixels), frame * pixels)
      made[frame] = 1
      // Frames are simulated in pairs; the other one is nearly free now, and a sparse look at the capture is not wasted.
      const other = frame ^ 1
      if (other < frames && !made[other]) {
        truths[other] = simulator.render(other, store, other * pixels)
        made[other] = 1
      }
    }
  }

  return {
    facts, seconds,
    async readFrames(first, count, signal) {
      if (closed) throw new Error('This rehearsal was closed.')
      if (!(first >= 0 && count >= 1 && first + count <= frames)) throw new RangeError(`Frames ${first} to ${first + count - 1} do not all lie in a rehearsal of ${frames}.`)
      const samples = make(count * pixels)
      let lastPause = performance.now()
      for (let i = 0; i < count; i++) {
        signal?.throwIfAborted()
        frameInto(first + i, samples, i * pixels)
        // Let a cancellation get through: a promise alone would not give way to messages.
        if (performance.now() - lastPause > 40) {
          await new Promise(resolve => setTimeout(resolve, 0))
          lastPause = performance.now()
        }
      }
      signal?.throwIfAborted()
      return { first, count, samples }
    },
    truth(frame) {
      if (!truths[frame]) frameInto(frame, scratch, 0)
      return truths[frame]!
    },
    close() {
      closed = true
      store = null
    },
  }
}
