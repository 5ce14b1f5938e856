import { InlinePool, PortPool, type Pool, type Port } from './pool'

/** Compute workers of a browser: one per processor, at most eight; this thread alone where workers cannot be started. */
export function browserPool(): Pool {
  const wanted = Math.max(1, Math.min(8, navigator.hardwareConcurrency || 1))
  try {
    const ports = Array.from({ length: wanted }, () => workerPort(new Worker(new URL('../compute.worker.ts', import.meta.url), { type: 'module' })))
    return new PortPool(ports, globalThis.crossOriginIsolated === true && typeof SharedArrayBuffer !== 'undefined')
  }
  catch {
    return new InlinePool()
  }
}

function workerPort(worker: Worker): Port {
  return {
    post: (message, transfer) => worker.postMessage(message, transfer),
    onMessage: (handler) => { worker.onmessage = event => handler(event.data) },
    onFailure: (handler) => {
      worker.onerror = event => handler(new Error(event.message || 'A compute worker stopped.'))
      worker.onmessageerror = () => handler(new Error('A compute worker sent what cannot be read.'))
    },
    end: () => worker.terminate(),
  }
}
