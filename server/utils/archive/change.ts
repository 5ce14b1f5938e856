/** Filing, changing, deleting and restoring a run. */
import type { z } from 'zod'
import type { RunDetail, runPatchBody } from '../../../shared/api/archive'
import { requiredFileRoles } from '../../../shared/schemas/run'
import { mayWith, type ThingAction } from '../access'
import { audit } from '../audit'
import { useDb } from '../db'
import { notFound, problem, texts } from '../errors'
import type { Actor } from '../session'
import { targetOf } from './announce'
import { findRun, RESTORE_MS, runDetail } from './read'
import type { FileRow } from './receive'
import { settleFile } from './receive'
import { isStored, removeStored } from './store'

/** The run, if the actor may do this with it. A run that may be seen but not changed answers 403. */
export async function runFor(actor: Actor, id: string, action: ThingAction) {
  const row = await findRun(actor, id)
  if (!mayWith(actor, action, { ownerId: row.owner_id, clubId: row.club_id })) throw problem(403, 'not-allowed', texts.notAllowed)
  return row
}

/** Files a run whose files are all in place: one transaction, and only then is it to be seen by others. */
export async function fileRun(actor: Actor, id: string): Promise<RunDetail> {
  const run = await runFor(actor, id, 'run.file')
  if (run.state === 'filed') return runDetail(actor, id)
  if (run.state !== 'announced') throw problem(409, 'deleted', 'This run was deleted; restore it first.')
  const files = await useDb()('run_files').where({ run_id: id }) as FileRow[]
  const states = new Map<string, { name: string, state: FileRow['state'] }>()
  for (const file of files) {
    let state = await settleFile(file.id)
    // The row says that it is there and the disk does not (a store brought back from an older copy): the bytes must come again.
    if (state === 'received' && !await isStored(file.sha256, Number(file.size_bytes))) {
      await useDb()('run_files').where({ id: file.id }).update({ state: 'announced', upload_id: null, received_at: null })
      state = 'announced'
    }
    states.set(file.id, { name: file.role, state })
  }
  const open = [...states.values()].filter(file => file.state !== 'received').map(file => file.name)
  const absent = requiredFileRoles.filter(role => !files.some(file => file.role === role))
  if (open.length || absent.length) throw problem(409, 'incomplete', `These files are not in the archive yet: ${[...open, ...absent].join(', ')}. Upload them and file the run again; what has arrived is kept.`, { missing: [...open, ...absent] })
  await useDb().transaction(async (trx) => {
    const changed = await trx('runs').where({ id, state: 'announced' }).update({ state: 'filed', filed_at: new Date() })
    if (changed) await audit(trx, { clubId: actor.clubId, userId: actor.id, actor: actor.name, action: 'filed', kind: 'run', id, detail: `${run.target_name}, best ${run.keep_count} of ${run.frames} frames` })
    if (changed && run.replaces_run_id) await audit(trx, { clubId: actor.clubId, userId: actor.id, actor: actor.name, action: 'replaced by a newer run', kind: 'run', id: run.replaces_run_id })
  })
  return runDetail(actor, id)
}

export async function changeRun(actor: Actor, id: string, body: z.output<typeof runPatchBody>): Promise<RunDetail> {
  const run = await runFor(actor, id, 'run.write')
  await useDb().transaction(async (trx) => {
    const changes: Record<string, unknown> = {}
    if (body.note !== undefined) changes.note = body.note
    if (body.targetName !== undefined) changes.target_id = await targetOf(trx, actor.clubId, body.targetName, run.target_kind)
    if (body.instrumentId !== undefined) {
      if (body.instrumentId && !await trx('instruments').where({ id: body.instrumentId, club_id: actor.clubId }).whereNull('deleted_at').first()) throw notFound()
      changes.instrument_id = body.instrumentId
    }
    if (Object.keys(changes).length === 0) return
    await trx('runs').where({ id }).update(changes)
    await audit(trx, { clubId: actor.clubId, userId: actor.id, actor: actor.name, action: 'changed', kind: 'run', id, detail: Object.keys(changes).map(key => key.replace('_id', '')).join(', ') })
  })
  return runDetail(actor, id)
}

export async function deleteRun(actor: Actor, id: string): Promise<void> {
  await runFor(actor, id, 'run.delete')
  await useDb().transaction(async (trx) => {
    const changed = await trx('runs').where({ id }).whereNot({ state: 'deleted' }).update({ state: 'deleted', deleted_at: new Date() })
    if (changed) await audit(trx, { clubId: actor.clubId, userId: actor.id, actor: actor.name, action: 'deleted', kind: 'run', id })
  })
}

export async function restoreRun(actor: Actor, id: string): Promise<RunDetail> {
  const run = await runFor(actor, id, 'run.delete')
  if (run.state !== 'deleted') return runDetail(actor, id)
  if (!run.deleted_at || Date.now() - run.deleted_at.getTime() >= RESTORE_MS) throw problem(410, 'too-late', 'This run was deleted more than 30 days ago and cannot be restored.')
  await useDb().transaction(async (trx) => {
    await trx('runs').where({ id }).update({ state: run.filed_at ? 'filed' : 'announced', deleted_at: null })
    await audit(trx, { clubId: actor.clubId, userId: actor.id, actor: actor.name, action: 'restored', kind: 'run', id })
  })
  return runDetail(actor, id)
}

/** Removes runs deleted over 30 days ago, and stored files that no row needs any more. */
export async function purgeDeleted(now = Date.now()): Promise<number> {
  const db = useDb()
  const old = await db('runs').where({ state: 'deleted' }).where('deleted_at', '<', new Date(now - RESTORE_MS)).select('id', 'club_id')
  for (const { id, club_id } of old) {
    const hashes = await db('run_files').where({ run_id: id }).distinct('sha256').pluck('sha256') as string[]
    await db.transaction(async (trx) => {
      await trx('runs').where({ id }).delete()
      await audit(trx, { clubId: club_id, userId: null, actor: 'Lull', action: 'removed for good', kind: 'run', id })
    })
    for (const sha256 of hashes) if (!await db('run_files').where({ sha256 }).first('id')) await removeStored(sha256)
  }
  return old.length
}
