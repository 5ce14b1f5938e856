import type { ComputeReply, ComputeRequest, Batch } from './messages'
import type { Pool } from './pool'

/** Requests in flight per worker: one being worked on, one waiting. */
const DEPTH = 2
/** Pixels per request: a few milliseconds of work, so that a cancel is soon and workers finish together. */
const PIECE_PIXELS = 2 ** 19

/**
 * Feeds requests to the workers of a pool. Replies arrive in any order; whoever uses them must not depend
 * on it. The first failure, or the signal, ends the feed.
 */
export class Feed {
  readonly #pool: Pool
  readonly #signal: AbortSignal
  readonly #flying: Set<Promise<void>>[]
  #failure: unknown = null

  constructor(pool: Pool, signal: AbortSignal) {
    this.#pool = pool
    this.#signal = signal
    this.#flying = Array.from({ length: pool.size }, () => new Set())
  }

  /** Sends as soon as there is room: to the given worker, or to the one with least to do. */
  async send<T extends ComputeRequest>(worker: number | null, request: T, transfer: ArrayBuffer[], then: (reply: ComputeReply<T>) => void): Promise<void> {
    let to = worker ?? this.#idlest()
    while (this.#flying[to]!.size >= DEPTH) {
      await Promise.race(worker === null ? this.#flying.flatMap(set => [...set]) : this.#flying[to]!)
      this.#check()
      to = worker ?? this.#idlest()
    }
    this.#check()
    const set = this.#flying[to]!
    const flight: Promise<void> = this.#pool.call(to, request, transfer)
      .then((reply) => { if (!this.#signal.aborted) then(reply) })
      .catch((reason: unknown) => { this.#failure ??= reason })
      .finally(() => set.delete(flight))
    set.add(flight)
  }

  /** Waits for everything in flight; a cancel does not wait. */
  async drain(): Promise<void> {
    await unlessAborted(Promise.all(this.#flying.flatMap(set => [...set])), this.#signal)
    this.#check()
  }

  #idlest(): number {
    let best = 0
    this.#flying.forEach((set, i) => { if (set.size < this.#flying[best]!.size) best = i })
    return best
  }

  #check(): void {
    this.#signal.throwIfAborted()
    if (this.#failure) throw this.#failure
  }
}

/** Resolves with the work, or rejects as soon as the signal fires; the work itself is not stopped. */
export async function unlessAborted<T>(work: Promise<T>, signal: AbortSignal): Promise<T> {
  signal.throwIfAborted()
  let stop: () => void = () => undefined
  const aborted = new Promise<never>((_resolve, reject) => {
    stop = () => reject(signal.reason as Error)
    signal.addEventListener('abort', stop, { once: true })
  })
  work.catch(() => undefined)
  try {
    return await Promise.race([work, aborted])
  }
  finally {
    signal.removeEventListener('abort', stop)
  }
}

/** Frames per request for a frame of so many pixels. */
export const pieceFrames = (pixels: number): number => Math.max(1, Math.round(PIECE_PIXELS / pixels))

/** Frames [from, from + count) of a batch, ready to send: in place where memory is shared, else as a copy to hand over. */
export function ship(pool: Pool, batch: Batch, from: number, count: number, frameSamples: number): { batch: Batch, transfer: ArrayBuffer[] } {
  const offset = batch.offset + from * frameSamples
  if (pool.shared) return { batch: { first: batch.first + from, count, samples: batch.samples, offset }, transfer: [] }
  const samples = batch.samples.slice(offset, offset + count * frameSamples)
  return { batch: { first: batch.first + from, count, samples, offset: 0 }, transfer: [samples.buffer] }
}
