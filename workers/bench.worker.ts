/** Entry of the core for captures: owns the session and its transfers, nothing else. */
import { expose, releaseProxy, transfer } from 'comlink'
import type { RunEvent, StackImage, WorkerApi } from './api'
import { browserPool } from './run/browser-pool'
import { memoryBudget } from './run/budget'
import { opfsStore } from './run/opfs-store'
import { Session } from './run/session'

const session = new Session({ makePool: browserPool, store: opfsStore(), budgetBytes: memoryBudget() })

const handOver = (image: StackImage) => transfer(image, [image.samples.buffer as ArrayBuffer])

function eventBuffers(event: RunEvent): ArrayBuffer[] {
  switch (event.kind) {
    case 'frames': return [...new Set(Object.values(event.columns).filter(ArrayBuffer.isView).map(column => column.buffer as ArrayBuffer))]
    case 'surveyed': return [event.preview.samples.buffer as ArrayBuffer]
    case 'preview':
    case 'proof': return [event.image.samples.buffer as ArrayBuffer]
    default: return []
  }
}

expose({
  open: session.open.bind(session),
  run: async (recipe, optics, onEvent) => {
    const remote = onEvent as typeof onEvent & { [releaseProxy]?: () => void }
    let heard: unknown
    try {
      const answer = await session.run(recipe, optics, (event) => { heard = remote(transfer(event, eventBuffers(event))) })
      // The answer comes after the last event, not before.
      await heard
      return answer
    }
    finally {
      remote[releaseProxy]?.()
    }
  },
  cancel: () => session.cancel(),
  stack: async (count, restored, dragging, part) => handOver(await session.stack(count, restored, dragging, part)),
  figures: count => session.figures(count),
  evidence: () => session.evidence(),
  starTransfer: count => session.starTransfer(count),
  restorePlan: count => session.restorePlan(count),
  frame: async index => handOver(await session.frame(index)),
  export: async (kinds, context) => {
    const files = await session.export(kinds, context)
    return transfer(files, [...new Set(files.map(file => file.bytes.buffer as ArrayBuffer))])
  },
  measure: request => session.measure(request),
  drift: async (declinationDeg, onProgress) => {
    const remote = onProgress as typeof onProgress & { [releaseProxy]?: () => void }
    try {
      return await session.drift(declinationDeg, (done, total) => { void remote(done, total) })
    }
    finally {
      remote[releaseProxy]?.()
    }
  },
  close: () => session.close(),
  alive: () => Promise.resolve(true),
} satisfies WorkerApi)
