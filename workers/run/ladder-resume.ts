import type { Pool } from './pool'
import type { Stages } from './store'

/** Bytes of unfinished sums beyond which none are saved: writing them would take longer than adding again. */
const MOST_BYTES = 384 * 2 ** 20

/** Where each sum lives: the worker that owns it and its slot there. Index = 2 × rung + half. */
export interface SumPlaces { worker: number[], slot: number[] }

/** The head of a saved, unfinished ladder; its sums lie beside it, one by one. */
interface Head { generation: string, done: Uint8Array, filled: Uint8Array }

/** Tells the generations of two pages apart that work on the same ladder: neither may overwrite what the other's head names. */
const page = Math.random().toString(36).slice(2, 10)
let generations = 0

/**
 * Saves and restores an unfinished ladder. The sums of a new generation are written beside the old ones, the
 * head last, so that whatever moment the page goes away, the head names sums that belong together.
 */
export class LadderKeeper {
  readonly #stages: Stages
  readonly #key: string
  #generation = ''
  #filled: Uint8Array | null = null

  constructor(stages: Stages, key: string) {
    this.#stages = stages
    this.#key = key
  }

  /**
   * Puts saved sums back into the workers. Returns which frames are in them, or null; then some sums may have been put back
   * all the same (another page, or a full store, has dropped the rest), and all must be opened anew.
   */
  async restore(pool: Pool, { worker, slot }: SumPlaces): Promise<Uint8Array | null> {
    const head = await this.#stages.load<Head>('laddering', this.#key)
    if (!head || head.filled.length !== worker.length) return null
    for (let k = 0; k < worker.length; k++) {
      if (!head.filled[k]) continue
      const part = await this.#stages.load<{ sum: Float64Array | Int32Array }>('laddering', this.#name(head.generation, k))
      if (!part) return null
      await pool.call(worker[k]!, { op: 'put', slot: slot[k]!, sum: Float64Array.from(part.sum) })
    }
    this.#generation = head.generation
    this.#filled = head.filled
    return head.done
  }

  async save(pool: Pool, { worker, slot }: SumPlaces, done: Uint8Array, sumBytes: number): Promise<void> {
    if (worker.length * sumBytes > MOST_BYTES) return
    const old = { generation: this.#generation, filled: this.#filled }
    const filled = new Uint8Array(worker.length)
    this.#generation = `${page}${++generations}`
    for (let k = 0; k < worker.length; k++) {
      const { sums: [sum] } = await pool.call(worker[k]!, { op: 'peek', slots: [slot[k]!] })
      if (sum!.length === 0) continue
      filled[k] = 1
      await this.#stages.save('laddering', this.#name(this.#generation, k), { sum })
    }
    this.#filled = filled
    await this.#stages.save('laddering', this.#key, { generation: this.#generation, done, filled } satisfies Head)
    await this.#drop(old.generation, old.filled)
  }

  async drop(): Promise<void> {
    await this.#stages.drop('laddering', this.#key)
    await this.#drop(this.#generation, this.#filled)
  }

  async #drop(generation: string, filled: Uint8Array | null): Promise<void> {
    for (let k = 0; k < (filled?.length ?? 0); k++) if (filled![k]) await this.#stages.drop('laddering', this.#name(generation, k))
  }

  #name(generation: string, k: number): string { return `${this.#key}-${generation}-${k}` }
}
