import { Worker } from 'node:worker_threads'
import { PortPool, type Pool, type Port } from '../../workers/run/pool'

/** Compute workers as Node threads, over shared memory unless told otherwise. */
export function nodePool(size: number, shared = true): Pool {
  return new PortPool(Array.from({ length: size }, threadPort), shared)
}

function threadPort(): Port {
  const thread = new Worker(new URL('./compute-thread.mjs', import.meta.url))
  return {
    post: (message, transfer) => thread.postMessage(message, transfer),
    onMessage: (handler) => { thread.on('message', handler) },
    onFailure: (handler) => {
      thread.on('error', handler)
      thread.on('exit', () => handler(new Error('A compute thread stopped.')))
    },
    end: () => { void thread.terminate() },
  }
}
