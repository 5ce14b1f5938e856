import type { FrameReader, Samples } from '../decode/types'
import type { Batch } from './messages'

/** Bytes of one block of frames: long enough for the disk, short enough to stop soon. */
const BLOCK_BYTES = 4 * 2 ** 20

export interface FrameStoreOptions {
  /** Bytes of decoded frames that may be kept. */
  budgetBytes: number
  /** Keep frames in shared memory, so that workers read them in place. */
  shared: boolean
  /** Frames per block; chosen from the frame size when absent. Results never depend on it. */
  blockFrames?: number
}

/**
 * The decoded frames of a capture. When all fit in the budget they stay, and a second pass reads no file;
 * otherwise blocks stream and single frames are kept while there is room, the longest unused dropped first.
 */
export class FrameStore {
  readonly reader: FrameReader
  readonly count: number
  readonly frameSamples: number
  readonly blockFrames: number
  readonly blockCount: number
  readonly keepsAll: boolean
  readonly #shared: boolean
  readonly #blocks = new Map<number, Batch>()
  readonly #singles = new Map<number, Batch>()
  readonly #mostSingles: number
  /** Frames that could not be read; their samples are zeros. */
  readonly unreadable = new Set<number>()
  #reading: Promise<unknown> = Promise.resolve()

  constructor(reader: FrameReader, options: FrameStoreOptions) {
    const { facts } = reader
    this.reader = reader
    this.count = facts.frameCount
    this.frameSamples = facts.width * facts.height * facts.planes
    const frameBytes = this.frameSamples * bytesOf(facts.sampleKind)
    this.blockFrames = Math.max(1, Math.min(this.count, options.blockFrames ?? Math.min(512, Math.floor(BLOCK_BYTES / frameBytes))))
    this.blockCount = Math.ceil(this.count / this.blockFrames)
    this.keepsAll = frameBytes * this.count <= options.budgetBytes
    this.#shared = options.shared && typeof SharedArrayBuffer !== 'undefined'
    this.#mostSingles = Math.max(1, Math.floor(options.budgetBytes / 2 / frameBytes))
  }

  blockOf(frame: number): number { return Math.floor(frame / this.blockFrames) }

  /** A block of frames, from memory or read. */
  async block(index: number, signal?: AbortSignal): Promise<Batch> {
    const kept = this.#blocks.get(index)
    if (kept) return kept
    const first = index * this.blockFrames
    const batch = await this.#read(first, Math.min(this.blockFrames, this.count - first), signal)
    if (this.keepsAll) this.#blocks.set(index, batch)
    return batch
  }

  /** One frame, from memory or read; kept for the next time. */
  async frame(index: number, signal?: AbortSignal): Promise<Batch> {
    const block = this.#blocks.get(this.blockOf(index))
    if (block) return { ...block, first: index, count: 1, offset: block.offset + (index - block.first) * this.frameSamples }
    const kept = this.#singles.get(index)
    this.#singles.delete(index)
    const batch = kept ?? await this.#read(index, 1, signal)
    this.#singles.set(index, batch)
    if (this.#singles.size > this.#mostSingles) this.#singles.delete(this.#singles.keys().next().value!)
    return batch
  }

  /** True where the frame is in memory, so that using it costs no reading. */
  holds(index: number): boolean {
    return this.#blocks.has(this.blockOf(index)) || this.#singles.has(index)
  }

  /** Blocks in the given order, each read while the one before is worked on. */
  async* blocks(order: readonly number[], signal?: AbortSignal): AsyncGenerator<Batch> {
    let next = order.length > 0 ? this.#ahead(order[0]!, signal) : null
    for (let i = 0; i < order.length; i++) {
      const current = next!
      const batch = await current
      next = i + 1 < order.length ? this.#ahead(order[i + 1]!, signal) : null
      yield batch
    }
  }

  /** A promise whose rejection is only seen by who awaits it. */
  #ahead(index: number, signal?: AbortSignal): Promise<Batch> {
    const promise = this.block(index, signal)
    promise.catch(() => undefined)
    return promise
  }

  /** Readers are not reentrant: reads queue. */
  #read(first: number, count: number, signal?: AbortSignal): Promise<Batch> {
    const promise = this.#reading.then(async () => {
      signal?.throwIfAborted()
      const samples = await this.#samples(first, count, signal)
      return { first, count, offset: 0, samples: this.#shared ? share(samples) : samples }
    })
    this.#reading = promise.catch(() => undefined)
    return promise
  }

  /** Samples of some frames. Where a block fails, its frames are tried one by one; a block of which none can be read is an error. */
  async #samples(first: number, count: number, signal?: AbortSignal): Promise<Samples> {
    try {
      return (await this.reader.readFrames(first, count, signal)).samples
    }
    catch (reason) {
      signal?.throwIfAborted()
      if (count === 1) {
        if (!this.unreadable.has(first)) throw reason
        return blank(this.reader.facts.sampleKind, this.frameSamples)
      }
      return this.#salvage(first, count, reason, signal)
    }
  }

  async #salvage(first: number, count: number, reason: unknown, signal?: AbortSignal): Promise<Samples> {
    const out = blank(this.reader.facts.sampleKind, this.frameSamples * count)
    const failed: number[] = []
    for (let i = 0; i < count; i++) {
      try {
        out.set((await this.reader.readFrames(first + i, 1, signal)).samples, i * this.frameSamples)
      }
      catch {
        signal?.throwIfAborted()
        failed.push(first + i)
      }
    }
    if (failed.length === count) throw reason
    for (const frame of failed) this.unreadable.add(frame)
    return out
  }

  clear(): void {
    this.#blocks.clear()
    this.#singles.clear()
  }
}

export function bytesOf(kind: 'uint8' | 'uint16' | 'float32'): number {
  return kind === 'uint8' ? 1 : kind === 'uint16' ? 2 : 4
}

/** A copy in shared memory. */
function share(samples: Samples): Samples {
  const buffer = new SharedArrayBuffer(samples.byteLength)
  const copy = new (samples.constructor as new (buffer: SharedArrayBuffer) => Samples)(buffer)
  copy.set(samples)
  return copy
}

function blank(kind: 'uint8' | 'uint16' | 'float32', length: number): Samples {
  return kind === 'uint8' ? new Uint8Array(length) : kind === 'uint16' ? new Uint16Array(length) : new Float32Array(length)
}
