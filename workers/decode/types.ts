import type { CaptureProblem } from '../api'
import type { CaptureFacts } from '../../shared/schemas/capture'

/** Decoded samples as stored, native byte order. */
export type Samples = Uint8Array<ArrayBuffer> | Uint16Array<ArrayBuffer> | Float32Array<ArrayBuffer>

/** `count` frames from frame `first`: count × planes × height × width samples, planar (colour in the order R, G, B), row 0 at the top. */
export interface FrameBlock {
  first: number
  count: number
  samples: Samples
}

/** Reads frames of one capture, a block at a time, never the whole file. */
export interface FrameReader {
  readonly facts: CaptureFacts
  /** Seconds of each frame since the first one; null where the capture has no times. */
  readonly seconds: Float64Array | null
  /** Frames [first, first + count); the range must lie within facts.frameCount. Not reentrant: one read at a time. */
  readFrames(first: number, count: number, signal?: AbortSignal): Promise<FrameBlock>
  close(): void
}

/** A capture that cannot be used; `message` says what is wrong and what to do, for the user. */
export class CaptureError extends Error {
  override name = 'CaptureError'
  readonly code: CaptureProblem['code']
  constructor(code: CaptureProblem['code'], message: string) {
    super(message)
    this.code = code
  }
}
