import type { RunEvent } from '../api'
import type { FrameStore } from './frames'
import type { Pool } from './pool'
import type { ProgressMeter } from './progress'

/** What every pass works with. */
export interface PassContext {
  frames: FrameStore
  pool: Pool
  signal: AbortSignal
  progress: ProgressMeter
  emit: (event: RunEvent) => void
}

/** The same request to every worker, one after the other's answer not awaited. */
export async function toAll(pool: Pool, send: (worker: number) => Promise<unknown>): Promise<void> {
  await Promise.all(Array.from({ length: pool.size }, (_, worker) => send(worker)))
}
