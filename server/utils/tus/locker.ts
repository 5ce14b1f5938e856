/**
 * One writer an upload. A newcomer asks the holder to stop (its connection is usually dead already) and waits in
 * line without spinning; after five seconds it is told to try again.
 */
import type { Lock, Locker, RequestRelease } from '@tus/server'
import { ERRORS } from '@tus/server'

const WAIT_MS = 5000

interface Holder { release: RequestRelease, done: Promise<void>, free: () => void }
const holders = new Map<string, Holder>()

class UploadLock implements Lock {
  private mine: Holder | null = null
  constructor(private readonly id: string) {}

  async lock(signal: AbortSignal, requestRelease: RequestRelease): Promise<void> {
    const until = Date.now() + WAIT_MS
    for (;;) {
      const holder = holders.get(this.id)
      if (!holder) break
      const left = until - Date.now()
      if (left <= 0 || signal.aborted) throw ERRORS.ERR_LOCK_TIMEOUT
      await holder.release()
      let timer: NodeJS.Timeout | undefined
      await Promise.race([holder.done, new Promise(resolve => (timer = setTimeout(resolve, left)))])
      clearTimeout(timer)
    }
    let free = () => {}
    const done = new Promise<void>(resolve => (free = resolve))
    this.mine = { release: requestRelease, done, free }
    holders.set(this.id, this.mine)
  }

  async unlock(): Promise<void> {
    if (this.mine && holders.get(this.id) === this.mine) holders.delete(this.id)
    this.mine?.free()
    this.mine = null
  }
}

export const uploadLocker: Locker = { newLock: id => new UploadLock(id) }
