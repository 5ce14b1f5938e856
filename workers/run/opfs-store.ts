import type { StageStore } from './store'

/** Bytes of stage results kept in the browser; the longest unused are dropped first. */
const QUOTA = 1024 * 2 ** 20
const FOLDER = 'lull-stages'

/** Stage results in the browser's private file system; null where there is none. */
export function opfsStore(quota = QUOTA): StageStore | null {
  if (typeof navigator === 'undefined' || !navigator.storage?.getDirectory) return null
  const folder = async () => (await navigator.storage.getDirectory()).getDirectoryHandle(FOLDER, { create: true })
  return {
    async read(name) {
      try {
        const file = await (await (await folder()).getFileHandle(name)).getFile()
        return new Uint8Array(await file.arrayBuffer())
      }
      catch {
        return null
      }
    },
    write: (name, bytes) => locked(async () => {
      if (bytes.length > quota / 2) return
      const into = await folder()
      await makeRoom(into, bytes.length, quota, name)
      const handle = await (await into.getFileHandle(name, { create: true })).createSyncAccessHandle()
      try {
        handle.truncate(0)
        handle.write(bytes, { at: 0 })
        handle.flush()
      }
      finally {
        handle.close()
      }
    }),
    async remove(name) {
      await (await folder()).removeEntry(name).catch(() => undefined)
    },
  }
}

/** One writer at a time over all pages: rooms are made and files written without another page in between; a lock ends with its page. */
function locked(write: () => Promise<void>): Promise<void> {
  return navigator.locks ? navigator.locks.request(FOLDER, write) as Promise<void> : write()
}

/** Drops the oldest results until `bytes` more fit. */
async function makeRoom(folder: FileSystemDirectoryHandle, bytes: number, quota: number, name: string): Promise<void> {
  const files: { name: string, size: number, at: number }[] = []
  for await (const handle of folder.values()) {
    if (handle.kind !== 'file' || handle.name === name) continue
    const file = await (handle as FileSystemFileHandle).getFile()
    files.push({ name: handle.name, size: file.size, at: file.lastModified })
  }
  let used = files.reduce((sum, file) => sum + file.size, 0)
  for (const file of files.sort((a, b) => a.at - b.at)) {
    if (used + bytes <= quota) return
    await folder.removeEntry(file.name).catch(() => undefined)
    used -= file.size
  }
}
