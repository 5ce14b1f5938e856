import { Computer } from './computer'
import type { ComputeReply, ComputeRequest } from './messages'

/** Compute workers that requests can be sent to by number. */
export interface Pool {
  readonly size: number
  /** True where buffers can be shared between threads; then batches are not copied. */
  readonly shared: boolean
  /** True once a worker has failed: every further call is refused, and a new pool is needed. */
  readonly failed: boolean
  call<T extends ComputeRequest>(worker: number, request: T, transfer?: ArrayBuffer[]): Promise<ComputeReply<T>>
  /** Ends all workers; calls in flight are rejected. */
  end(): void
}

/** Everything in the caller's own thread: the path that works everywhere. */
export class InlinePool implements Pool {
  readonly size = 1
  readonly shared = true
  readonly failed = false
  readonly #computer = new Computer()

  async call<T extends ComputeRequest>(_worker: number, request: T): Promise<ComputeReply<T>> {
    await breathe()
    return this.#computer.handle(request)
  }

  end(): void {}
}

/** Lets waiting messages in, at most every 12 ms, so that a cancel is heard while one thread computes. */
let lastBreath = 0
export async function breathe(): Promise<void> {
  const now = performance.now()
  if (now - lastBreath < 12) return
  await new Promise<void>((resolve) => {
    const { port1, port2 } = new MessageChannel()
    port1.onmessage = () => { port1.close(); resolve() }
    port2.postMessage(null)
  })
  lastBreath = performance.now()
}

/** The other end of a thread, browser worker or Node thread alike. */
export interface Port {
  post(message: unknown, transfer: ArrayBuffer[]): void
  onMessage(handler: (message: unknown) => void): void
  onFailure(handler: (reason: Error) => void): void
  end(): void
}

interface Envelope { id: number, request: ComputeRequest }
type Answer = { id: number, reply: ComputeReply } | { id: number, error: string }

/** A pool over threads. A thread that fails rejects what it was asked and everything after. */
export class PortPool implements Pool {
  readonly size: number
  readonly shared: boolean
  readonly #ports: Port[]
  readonly #waiting = new Map<number, { worker: number, resolve: (reply: ComputeReply) => void, reject: (reason: Error) => void }>()
  #next = 1
  #failure: Error | null = null

  constructor(ports: Port[], shared: boolean) {
    this.#ports = ports
    this.size = ports.length
    this.shared = shared
    ports.forEach((port) => {
      port.onMessage(message => this.#settle(message as Answer))
      port.onFailure(reason => this.#fail(reason))
    })
  }

  get failed(): boolean { return this.#failure !== null }

  call<T extends ComputeRequest>(worker: number, request: T, transfer: ArrayBuffer[] = []): Promise<ComputeReply<T>> {
    if (this.#failure) return Promise.reject(this.#failure)
    const id = this.#next++
    return new Promise((resolve, reject) => {
      this.#waiting.set(id, { worker, resolve: resolve as (reply: ComputeReply) => void, reject })
      this.#ports[worker]!.post({ id, request } satisfies Envelope, transfer)
    })
  }

  #settle(answer: Answer): void {
    const waiting = this.#waiting.get(answer.id)
    this.#waiting.delete(answer.id)
    if ('error' in answer) waiting?.reject(new Error(answer.error))
    else waiting?.resolve(answer.reply)
  }

  #fail(reason: Error): void {
    this.#failure ??= reason
    for (const { reject } of this.#waiting.values()) reject(reason)
    this.#waiting.clear()
  }

  end(): void {
    this.#fail(new Error('The compute workers were ended.'))
    for (const port of this.#ports) port.end()
  }
}

/** Serves a Computer at the far end of a port. */
export function serveComputer(post: (message: unknown, transfer: ArrayBuffer[]) => void): (message: unknown) => void {
  const computer = new Computer()
  return (message) => {
    const { id, request } = message as Envelope
    try {
      const reply = computer.handle(request)
      post({ id, reply }, transferable(reply))
    }
    catch (reason) {
      post({ id, error: reason instanceof Error ? reason.message : String(reason) }, [])
    }
  }
}

/** Buffers of a reply that can be handed over instead of copied. */
function transferable(reply: ComputeReply): ArrayBuffer[] {
  if (!reply) return []
  const arrays = 'sums' in reply ? reply.sums : 'sum' in reply ? [reply.sum] : []
  return [...new Set(arrays.map(array => array.buffer).filter((buffer): buffer is ArrayBuffer => buffer instanceof ArrayBuffer && buffer.byteLength > 0))]
}
