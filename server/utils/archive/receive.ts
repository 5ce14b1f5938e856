/** From a finished upload to a received file, in steps that can be taken again after a kill at any moment. */
import { readdir, rm, stat } from 'node:fs/promises'
import path from 'node:path'
import { useDb } from '../db'
import { uploadsFolder } from '../folders'
import { hashFile, isStored, moveAside, moveIntoStore, sizeOf } from './store'

export interface FileRow { id: string, run_id: string, role: string, name: string, size_bytes: number, sha256: string, type: string, state: 'announced' | 'received' | 'refused', problem: string | null, upload_id: string | null }

const uploadPath = (uploadId: string) => path.join(uploadsFolder(), uploadId)

async function markReceived(id: string) {
  await useDb()('run_files').where({ id }).update({ state: 'received', problem: null, upload_id: null, received_at: new Date() })
}

async function forgetUpload(uploadId: string) {
  await rm(uploadPath(uploadId), { force: true })
  await rm(`${uploadPath(uploadId)}.json`, { force: true })
}

/**
 * Brings one announced file as far as its bytes allow: all bytes there → hash checked → moved into the store →
 * row received, or refused and kept aside. Returns the row's state afterwards.
 */
export async function settleFile(row: FileRow): Promise<FileRow['state']> {
  if (row.state === 'received') return 'received'
  const uploaded = row.upload_id ? await sizeOf(uploadPath(row.upload_id)) : null
  if (uploaded === row.size_bytes && row.upload_id) {
    const hash = await hashFile(uploadPath(row.upload_id))
    if (hash !== row.sha256) {
      const problem = `The bytes of ${row.name} that arrived are not those that were announced (SHA-256 ${hash.slice(0, 12)}… instead of ${row.sha256.slice(0, 12)}…). Upload the file again; if it happens twice, the file changed on your side.`
      await moveAside(uploadPath(row.upload_id), row.id)
      await useDb()('run_files').where({ id: row.id }).update({ state: 'refused', problem: problem.slice(0, 500), upload_id: null })
      await forgetUpload(row.upload_id)
      return 'refused'
    }
    await moveIntoStore(uploadPath(row.upload_id), row.sha256)
    await markReceived(row.id)
    await forgetUpload(row.upload_id)
    return 'received'
  }
  // Killed between the move into the store and the row: the store has the file, checked before it went there.
  if (uploaded === null && row.upload_id && await isStored(row.sha256, row.size_bytes)) {
    await markReceived(row.id)
    await forgetUpload(row.upload_id)
    return 'received'
  }
  return row.state
}

/** After a start: settles what a kill left between two steps. */
export async function reconcile(): Promise<void> {
  const rows = await useDb()('run_files').where({ state: 'announced' }).whereNotNull('upload_id') as FileRow[]
  for (const row of rows) await settleFile(row)
}

/** Uploads nobody has added to for this long are given up. */
export const ABANDONED_MS = 7 * 86_400_000

/** Removes abandoned uploads and upload files that no row knows. Counts from the last byte, not from creation. */
export async function sweepUploads(now = Date.now()): Promise<number> {
  let names: string[]
  try {
    names = await readdir(uploadsFolder())
  }
  catch {
    return 0
  }
  let removed = 0
  for (const id of new Set(names.map(name => name.replace(/\.json$/, '')))) {
    const times = await Promise.all([uploadPath(id), `${uploadPath(id)}.json`].map(file => stat(file).then(info => info.mtimeMs, () => 0)))
    const touched = Math.max(...times)
    const row = await useDb()('run_files').where({ upload_id: id }).first()
    const limit = row ? ABANDONED_MS : 86_400_000
    if (now - touched < limit) continue
    if (row) await useDb()('run_files').where({ id: row.id }).update({ upload_id: null })
    await forgetUpload(id)
    removed++
  }
  return removed
}
