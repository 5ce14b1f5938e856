/** A small capture made on the spot: a double star that moves and blurs from frame to frame, with noise and hot pixels. */
import type { FrameBlock, FrameReader, Samples } from '../../../workers/decode/types'
import type { CaptureFacts } from '../../../shared/schemas/capture'

export interface MovingDouble { frames: number, width: number, height: number, seed?: number, kind?: 'uint8' | 'uint16' | 'float32', planes?: 1 | 3 }

/** Place of the brighter star and width (sigma, px) of each frame: the truth. */
export interface DoubleTruth { x: number[], y: number[], sigma: number[] }

export const SEPARATION = { x: 7, y: -4 }

/** A seeded generator of uniform deviates (mulberry32). */
export function uniformFrom(seed: number): () => number {
  let state = seed | 0
  return () => {
    state = (state + 0x6d2b79f5) | 0
    let t = Math.imul(state ^ (state >>> 15), 1 | state)
    t = (t + Math.imul(t ^ (t >>> 7), 61 | t)) ^ t
    return ((t ^ (t >>> 14)) >>> 0) / 4294967296
  }
}

export function movingDouble({ frames, width, height, seed = 7, kind = 'uint16', planes = 1 }: MovingDouble) {
  const uniform = uniformFrom(seed)
  const normal = () => Math.sqrt(-2 * Math.log(1 - uniform())) * Math.cos(2 * Math.PI * uniform())
  const truth: DoubleTruth = { x: [], y: [], sigma: [] }
  const size = width * height
  const samples: Samples = kind === 'uint8' ? new Uint8Array(frames * planes * size) : kind === 'uint16' ? new Uint16Array(frames * planes * size) : new Float32Array(frames * planes * size)
  const top = kind === 'uint8' ? 255 : 65535
  const unit = top / 65535
  for (let i = 0; i < frames; i++) {
    const x = width / 2 + 3 * normal() + 4 * (i / frames - 0.5)
    const y = height / 2 + 3 * normal()
    const sigma = 1.6 + 2.4 * uniform() ** 1.5
    truth.x.push(x)
    truth.y.push(y)
    truth.sigma.push(sigma)
    for (let plane = 0; plane < planes; plane++) {
      for (let k = 0; k < size; k++) {
        const at = (dx: number, dy: number) => ((k % width) - x - dx) ** 2 + (Math.floor(k / width) - y - dy) ** 2
        const light = (2.4e5 / sigma ** 2) * (Math.exp(-at(0, 0) / (2 * sigma * sigma)) + 0.6 * Math.exp(-at(SEPARATION.x, SEPARATION.y) / (2 * sigma * sigma)))
        const value = (900 + 0.4 * light + 60 * normal()) * unit
        samples[(i * planes + plane) * size + k] = kind === 'float32' ? value : Math.max(0, Math.min(top, Math.round(value)))
      }
      samples[(i * planes + plane) * size + 5 * width + 9] = kind === 'float32' ? 20_000 : top * 0.3
    }
  }
  return { facts: doubleFacts(frames, width, height, kind, planes), samples, truth }
}

function doubleFacts(frameCount: number, width: number, height: number, kind: 'uint8' | 'uint16' | 'float32', planes: 1 | 3): CaptureFacts {
  return {
    name: 'moving double', format: 'rehearsal', fileCount: 1, sizeBytes: 0, fingerprint: `${frameCount}-${width}-${height}-${kind}-${planes}`.padEnd(64, '0'),
    width, height, frameCount, declaredFrameCount: frameCount, planes, mosaic: 'none', sampleKind: kind,
    bitDepth: kind === 'uint8' ? 8 : kind === 'uint16' ? 16 : 32, saturation: kind === 'uint8' ? 255 : kind === 'uint16' ? 65535 : null,
    byteOrder: { value: 'little', decidedBy: 'format' },
    times: { start: null, end: null, source: 'none', medianIntervalMs: null, droppedFrames: 0, disordered: false },
    exposureMs: null, observer: '', instrument: '', telescope: '', object: '', filter: '',
    apertureMm: null, focalLengthMm: null, pixelSizeUm: null, notes: [],
  }
}

/** A reader over samples in memory that counts the frames read; `before` runs ahead of every read. */
export class SpyReader implements FrameReader {
  readonly seconds = null
  framesRead = 0
  reads = 0
  closed = false
  constructor(readonly facts: CaptureFacts, readonly samples: Samples, readonly before: (first: number) => void = () => undefined) {}

  async readFrames(first: number, count: number, signal?: AbortSignal): Promise<FrameBlock> {
    signal?.throwIfAborted()
    this.before(first)
    this.reads += 1
    this.framesRead += count
    const stride = this.facts.width * this.facts.height * this.facts.planes
    return { first, count, samples: this.samples.slice(first * stride, (first + count) * stride) as Samples }
  }

  close(): void { this.closed = true }
}
