/** Files named by their SHA-256; two runs with the same file share it. */
import { createHash } from 'node:crypto'
import { createReadStream } from 'node:fs'
import { mkdir, open, rename, rm, stat } from 'node:fs/promises'
import path from 'node:path'
import { pipeline } from 'node:stream/promises'
import { refusedFolder, storeFolder } from '../folders'

export const storedPath = (sha256: string) => path.join(storeFolder(), sha256.slice(0, 2), sha256)

/** SHA-256 of a file, streamed. */
export async function hashFile(file: string): Promise<string> {
  const hash = createHash('sha256')
  await pipeline(createReadStream(file, { highWaterMark: 1 << 20 }), hash)
  return hash.digest('hex')
}

export async function sizeOf(file: string): Promise<number | null> {
  try {
    return (await stat(file)).size
  }
  catch {
    return null
  }
}

export const isStored = async (sha256: string, sizeBytes: number) => await sizeOf(storedPath(sha256)) === sizeBytes

async function sync(place: string) {
  const handle = await open(place, 'r')
  try {
    await handle.sync()
  }
  finally {
    await handle.close()
  }
}

/** Moves a checked file into the store. The bytes are on the disk before the name is, so a power cut leaves no half file under a hash. */
export async function moveIntoStore(file: string, sha256: string): Promise<void> {
  const target = storedPath(sha256)
  await mkdir(path.dirname(target), { recursive: true })
  await sync(file)
  await rename(file, target)
  await sync(path.dirname(target))
}

/** Keeps a file that did not match aside, under the id of its row, for the operator to look at. */
export async function moveAside(file: string, id: string): Promise<void> {
  await mkdir(refusedFolder(), { recursive: true })
  await rename(file, path.join(refusedFolder(), id))
}

export async function removeStored(sha256: string): Promise<void> {
  await rm(storedPath(sha256), { force: true })
}
