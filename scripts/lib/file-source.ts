/** Captures on disk, for the commands that run in Node. */
import type { FileHandle } from 'node:fs/promises'
import { open, readdir, stat } from 'node:fs/promises'
import path from 'node:path'
import { CaptureError } from '../../workers/decode/types'
import { checkRange } from '../../workers/source/range'
import type { ByteSource } from '../../workers/source/types'

/** A file on disk; opened at the first read and closed by close(). */
export function fileSource(file: string, name: string, size: number): ByteSource & { close(): Promise<void> } {
  let handle: Promise<FileHandle> | null = null
  async function readAt(bytes: Uint8Array, from: number, offset: number) {
    try {
      handle ??= open(file, 'r')
      return await (await handle).read(bytes, from, bytes.byteLength - from, offset)
    }
    catch (cause) {
      handle = null
      throw Object.assign(new CaptureError('unreadable', `${name} cannot be read. It may have been moved, changed or be on a card that was taken out, or you may not be allowed to read it. Put it back and start over.`), { cause })
    }
  }
  return {
    name,
    size,
    async read(offset, length, signal) {
      signal?.throwIfAborted()
      checkRange(name, size, offset, length)
      const bytes = new Uint8Array(length)
      let done = 0
      while (done < length) {
        const { bytesRead } = await readAt(bytes, done, offset + done)
        if (bytesRead === 0) throw new CaptureError('unreadable', `${name} became shorter while it was read. Copy it again and start over.`)
        done += bytesRead
      }
      return bytes
    },
    async close() {
      await (await handle)?.close()
      handle = null
    },
  }
}

/** The capture at a path: its name and its files (one file, or all files of a folder, not of folders within). */
export async function captureSources(place: string): Promise<{ name: string, sources: (ByteSource & { close(): Promise<void> })[] }> {
  let info
  try {
    info = await stat(place)
  }
  catch {
    throw new CaptureError('unreadable', `There is no capture at ${place}.`)
  }
  const name = path.basename(path.resolve(place))
  if (!info.isDirectory()) return { name, sources: [fileSource(place, name, info.size)] }
  const entries = (await readdir(place, { withFileTypes: true })).filter(entry => entry.isFile())
  const sources = await Promise.all(entries.map(async (entry) => {
    const file = path.join(place, entry.name)
    return fileSource(file, entry.name, (await stat(file)).size)
  }))
  return { name, sources }
}
