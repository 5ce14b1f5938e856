/** What nobody needs any more leaves the disk: abandoned uploads and announcements, refused files, stored files without a row. */
import { readdir, rm, stat } from 'node:fs/promises'
import path from 'node:path'
import { audit } from '../audit'
import { useDb } from '../db'
import { refusedFolder, storeFolder, uploadsFolder } from '../folders'
import { forgetUpload, uploadPath } from './receive'
import { storedPath } from './store'

const DAY = 86_400_000
/** Uploads nobody has added to for this long are given up. */
export const ABANDONED_MS = 7 * DAY
/** Upload files and stored files that no row knows stay for this long, so that nothing under way is taken. */
export const GRACE_MS = DAY
/** Runs that were announced, and of which nothing has arrived for this long, give their room back to the club. */
export const GIVEN_UP_MS = 30 * DAY
/** Files that did not match are kept aside for the operator to look at for this long. */
export const REFUSED_MS = 30 * DAY

const namesIn = (folder: string): Promise<string[]> => readdir(folder).catch(() => [])
const touchedAt = (file: string): Promise<number> => stat(file).then(info => info.mtimeMs, () => 0)

/** Counts from the last byte, not from creation. Finished files lie in the store and are none of its business. */
export async function sweepUploads(now = Date.now()): Promise<number> {
  let removed = 0
  for (const id of new Set((await namesIn(uploadsFolder())).map(name => name.replace(/\.json$/, '')))) {
    const touched = Math.max(await touchedAt(uploadPath(id)), await touchedAt(`${uploadPath(id)}.json`))
    const row = await useDb()('run_files').where({ upload_id: id }).first('id', 'state')
    // What a kill left of a file that lies in the store goes at once.
    if (row?.state !== 'received' && now - touched < (row ? ABANDONED_MS : GRACE_MS)) continue
    if (row) await useDb()('run_files').where({ id: row.id, upload_id: id }).whereNot({ state: 'received' }).update({ upload_id: null })
    await forgetUpload(id)
    removed++
  }
  return removed
}

/** Announced runs without any news become deleted ones, which their owners can restore for another thirty days. */
export async function sweepAnnouncements(now = Date.now()): Promise<number> {
  const db = useDb()
  const since = new Date(now - GIVEN_UP_MS)
  const rows = await db('runs as r').where({ 'r.state': 'announced' }).where('r.created_at', '<', since)
    .whereNotExists(db('run_files as f').whereRaw('f.run_id = r.id').where(news => news.where('f.received_at', '>=', since).orWhere(open => open.where('f.state', 'announced').whereNotNull('f.upload_id'))))
    .select('r.id', 'r.club_id')
  for (const { id, club_id } of rows) {
    await db.transaction(async (trx) => {
      const changed = await trx('runs').where({ id, state: 'announced' }).update({ state: 'deleted', deleted_at: new Date(now) })
      if (changed) await audit(trx, { clubId: club_id, userId: null, actor: 'Lull', action: 'gave up the filing', kind: 'run', id, detail: 'nothing arrived for 30 days' })
    })
  }
  return rows.length
}

export async function sweepRefused(now = Date.now()): Promise<number> {
  let removed = 0
  for (const name of await namesIn(refusedFolder())) {
    const file = path.join(refusedFolder(), name)
    if (now - await touchedAt(file) < REFUSED_MS) continue
    await rm(file, { force: true })
    removed++
  }
  return removed
}

/** A row of any state keeps the file of its hash. */
export async function sweepStore(now = Date.now()): Promise<number> {
  let removed = 0
  for (const part of await namesIn(storeFolder())) {
    const hashes = (await namesIn(path.join(storeFolder(), part))).filter(name => /^[0-9a-f]{64}$/.test(name))
    if (hashes.length === 0) continue
    const known = new Set(await useDb()('run_files').whereIn('sha256', hashes).distinct('sha256').pluck('sha256') as string[])
    for (const hash of hashes) {
      if (known.has(hash) || now - await touchedAt(storedPath(hash)) < GRACE_MS) continue
      await rm(storedPath(hash), { force: true })
      removed++
    }
  }
  return removed
}
