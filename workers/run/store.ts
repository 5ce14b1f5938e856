import { pack, unpack } from './pack'

/** Where stage results outlive the page: files by name. Every failure means "not there"; computing again is always possible. */
export interface StageStore {
  read(name: string): Promise<Uint8Array | null>
  write(name: string, bytes: Uint8Array<ArrayBuffer>): Promise<void>
  remove(name: string): Promise<void>
}

/** In memory, for Node and for tests. */
export class MemoryStore implements StageStore {
  readonly files = new Map<string, Uint8Array<ArrayBuffer>>()
  async read(name: string) { return this.files.get(name) ?? null }
  async write(name: string, bytes: Uint8Array<ArrayBuffer>) { this.files.set(name, bytes.slice()) }
  async remove(name: string) { this.files.delete(name) }
}

/** Stage results by stage and content key. */
export class Stages {
  readonly #store: StageStore | null
  constructor(store: StageStore | null) { this.#store = store }

  /** False where nothing outlives the page. */
  get keeps(): boolean { return this.#store !== null }

  /** Whether anything of a capture was ever kept; a note per fingerprint says so. */
  async knows(fingerprint: string): Promise<boolean> {
    return await this.load('capture', fingerprint) !== null
  }

  async load<T>(stage: string, key: string): Promise<T | null> {
    try {
      const bytes = await this.#store?.read(`${stage}-${key}`)
      return bytes ? unpack<T>(bytes) : null
    }
    catch {
      return null
    }
  }

  /** Keeps a result; a full or missing store is no error. */
  async save(stage: string, key: string, value: unknown): Promise<void> {
    if (!this.#store) return
    try {
      await this.#store.write(`${stage}-${key}`, pack(value))
    }
    catch {
      // Without room the result lives as long as the page.
    }
  }

  async drop(stage: string, key: string): Promise<void> {
    await this.#store?.remove(`${stage}-${key}`).catch(() => undefined)
  }
}
