/** From a finished upload to a received file, in steps that can be taken again after a kill at any moment. */
import { readFile, rm, writeFile } from 'node:fs/promises'
import path from 'node:path'
import { useDb } from '../db'
import { uploadsFolder } from '../folders'
import { hashFile, isStored, moveAside, moveIntoStore, sizeOf } from './store'

export interface FileRow {
  id: string, run_id: string, role: string, name: string, size_bytes: number, sha256: string, type: string
  state: 'announced' | 'received' | 'refused', problem: string | null
  /** Kept after the file is received, so that a client whose last answer was lost learns that it is done. */
  upload_id: string | null
  /** Set once the hash of this row's own bytes was found right, which is just before they move into the store. */
  received_at: Date | null
}

export const uploadPath = (uploadId: string) => path.join(uploadsFolder(), uploadId)

const rowOf = async (id: string) => {
  const row = await useDb()('run_files').where({ id }).first() as FileRow | undefined
  return row && { ...row, size_bytes: Number(row.size_bytes) }
}

async function markReceived({ id, upload_id }: FileRow): Promise<'received'> {
  await useDb()('run_files').where({ id }).update({ state: 'received', problem: null, received_at: new Date() })
  await forgetUpload(upload_id!)
  return 'received'
}

export async function forgetUpload(uploadId: string) {
  await rm(uploadPath(uploadId), { force: true })
  await rm(`${uploadPath(uploadId)}.json`, { force: true })
}

/** One settling of a file at a time: the last request of an upload and the request that files the run may meet. */
const settling = new Map<string, Promise<FileRow['state']>>()

/**
 * Brings one announced file as far as its bytes allow: all bytes there → hash checked → moved into the store →
 * row received, or refused and kept aside. Returns the row's state afterwards.
 */
export function settleFile(id: string): Promise<FileRow['state']> {
  const running = settling.get(id)
  if (running) return running
  const mine = settle(id).finally(() => settling.delete(id))
  settling.set(id, mine)
  return mine
}

async function settle(id: string): Promise<FileRow['state']> {
  const row = await rowOf(id)
  if (!row) return 'announced'
  if (row.state === 'received' || !row.upload_id) return row.state
  const upload = uploadPath(row.upload_id)
  try {
    const uploaded = await sizeOf(upload)
    // Killed between the move into the store and the row. The mark says that these bytes were ours: without it, whoever
    // knows the hash of a file could begin an upload, end it, and be given the file.
    if (uploaded === null) return row.received_at && await isStored(row.sha256, row.size_bytes) ? await markReceived(row) : row.state
    if (uploaded !== row.size_bytes) return row.state
    const hash = await hashFile(upload)
    if (hash !== row.sha256) return await refuse(row, hash)
    await useDb()('run_files').where({ id }).update({ received_at: new Date() })
    await moveIntoStore(upload, row.sha256)
    return await markReceived(row)
  }
  catch (error) {
    // Another process of this server may have been faster.
    const now = (error as NodeJS.ErrnoException).code === 'ENOENT' ? await rowOf(id) : undefined
    if (now?.state === 'received') return 'received'
    throw error
  }
}

async function refuse(row: FileRow, hash: string): Promise<'refused'> {
  const problem = `The bytes of ${row.name} that arrived are not those that were announced (SHA-256 ${hash.slice(0, 12)}… instead of ${row.sha256.slice(0, 12)}…). Upload the file again; if it happens twice, the file changed on your side.`
  await moveAside(uploadPath(row.upload_id!), row.id)
  await useDb()('run_files').where({ id: row.id }).update({ state: 'refused', problem: problem.slice(0, 500), upload_id: null })
  await forgetUpload(row.upload_id!)
  return 'refused'
}

/** After a start: settles what a kill left between two steps, and mends info files that a power cut left torn. */
export async function reconcile(): Promise<void> {
  const rows = await useDb()('run_files').where({ state: 'announced' }).whereNotNull('upload_id') as FileRow[]
  for (const row of rows) {
    try {
      await mendInfo(row)
      await settleFile(row.id)
    }
    catch (error) {
      console.error(`The upload of file ${row.id} could not be settled:`, (error as Error).message)
    }
  }
}

/** The upload server writes its info file in place; what it holds is known from the row, so no byte that arrived is lost with it. */
async function mendInfo(row: FileRow): Promise<void> {
  const id = row.upload_id!
  if (await sizeOf(uploadPath(id)) === null) return
  const info = `${uploadPath(id)}.json`
  const known = await readFile(info, 'utf8').then(text => JSON.parse(text) as { id?: unknown, size?: unknown } | null).catch(() => null)
  if (known?.id === id && known.size === Number(row.size_bytes)) return
  const text = JSON.stringify({ id, size: Number(row.size_bytes), offset: 0, metadata: { fileId: row.id }, creation_date: new Date().toISOString(), storage: { type: 'file', path: uploadPath(id) } })
  await writeFile(info, text)
}
