/** Keeps the archive in order: settles what a kill left half done, sweeps what nobody needs, every hour. */
import { purgeDeleted } from '../utils/archive/change'
import { reconcile } from '../utils/archive/receive'
import { sweepAnnouncements, sweepRefused, sweepStore, sweepUploads } from '../utils/archive/sweep'
import { isMigrated } from '../utils/migrate'

const HOUR = 3_600_000

export default defineNitroPlugin((nitro) => {
  let timer: NodeJS.Timeout | undefined
  let closed = false
  const keep = async () => {
    if (closed) return
    if (!isMigrated()) {
      timer = setTimeout(keep, 500)
      return
    }
    try {
      await reconcile()
      await sweepUploads()
      await sweepAnnouncements()
      await purgeDeleted()
      await sweepRefused()
      await sweepStore()
    }
    catch (error) {
      console.error('The archive could not be tidied:', (error as Error).message)
    }
    if (!closed) timer = setTimeout(keep, HOUR)
  }
  void keep()
  nitro.hooks.hook('close', () => {
    closed = true
    clearTimeout(timer)
  })
})
