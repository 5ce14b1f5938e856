/** Announcing a run: what it is, and the files that will come. */
import type { z } from 'zod'
import type { announceBody } from '../../../shared/api/archive'
import { recipeHash } from '../../../shared/recipe/canonical'
import { requiredFileRoles } from '../../../shared/schemas/run'
import type { Actor } from '../session'
import { audit } from '../audit'
import type { Db } from '../db'
import { useDb } from '../db'
import { notFound, problem } from '../errors'
import { newId } from '../tokens'
import { isStored } from './store'
import { cleanName, typeOf } from './types'

type Announcement = z.output<typeof announceBody>

const ARCSEC_PER_RADIAN_UM_MM = 206.264806

/** Announces a run, or finds the one that was announced before and not completed. Returns its id. */
export async function announce(actor: Actor, body: Announcement): Promise<string> {
  const { result } = body
  if (await recipeHash(result.recipe) !== result.recipeHash) throw problem(400, 'recipe-hash', 'The recipe and its hash do not belong together. Reload the bench and file the run again.')
  if (!/^[0-9a-f]{64}$/.test(result.facts.fingerprint)) throw problem(400, 'fingerprint', 'The capture has no proper fingerprint. Open it again on the bench and file the run again.')
  const missing = requiredFileRoles.filter(role => body.files.filter(file => file.role === role).length !== 1)
  if (missing.length) throw problem(400, 'files', `These files must be announced once each: ${missing.join(', ')}.`)
  const already = new Map<string, boolean>()
  for (const { sha256, sizeBytes } of body.files) already.set(sha256, await isStored(sha256, sizeBytes))

  return useDb().transaction(async (trx) => {
    // One announcement at a time in a club: the row of the club is the lock that makes the quota exact.
    const club = await trx('clubs').where({ id: actor.clubId }).forUpdate().first('quota_bytes')
    const columns = await columnsOf(trx, actor, body)
    const same = await trx('runs as r').join('captures as c', 'c.id', 'r.capture_id')
      .where({ 'r.owner_id': actor.id, 'r.state': 'announced', 'r.recipe_hash': result.recipeHash, 'c.fingerprint': result.facts.fingerprint, 'r.keep_count': result.keep.count }).first('r.id')
    const id: string = same?.id ?? newId()
    if (same) await trx('runs').where({ id }).update(columns)
    else await trx('runs').insert({ id, club_id: actor.clubId, owner_id: actor.id, capture_id: await captureOf(trx, actor.clubId, result.facts), state: 'announced', recipe_hash: result.recipeHash, created_at: new Date(), ...columns })
    const added = await setFiles(trx, id, body.files, already, actor)
    if (added > 0) await holdQuota(trx, actor.clubId, Number(club.quota_bytes), added)
    if (!same) await audit(trx, { clubId: actor.clubId, userId: actor.id, actor: actor.name, action: 'announced', kind: 'run', id, detail: body.targetName })
    return id
  })
}

/** What is said of the run, checked: only things of the club and the announcer's own earlier run can be named. */
async function columnsOf(trx: Db, actor: Actor, body: Announcement) {
  const { result } = body
  const instrument = body.instrumentId ? await trx('instruments').where({ id: body.instrumentId, club_id: actor.clubId }).whereNull('deleted_at').first() : null
  if (body.instrumentId && !instrument) throw notFound()
  if (body.replacesRunId && !await trx('runs').where({ id: body.replacesRunId, owner_id: actor.id, club_id: actor.clubId, state: 'filed' }).first('id')) throw notFound()
  if (body.recipeVersionId) {
    const version = await trx('recipe_versions as v').join('recipes as r', 'r.id', 'v.recipe_id').where({ 'v.id': body.recipeVersionId, 'r.club_id': actor.clubId }).first('r.owner_id', 'r.shared')
    if (!version || (version.owner_id !== actor.id && !version.shared)) throw notFound()
  }
  const pixel = result.facts.pixelSizeUm ?? instrument?.pixel_size_um ?? null
  const focal = result.facts.focalLengthMm ?? instrument?.focal_length_mm ?? null
  return {
    target_id: await targetOf(trx, actor.clubId, body.targetName, result.kind), instrument_id: body.instrumentId, recipe_version_id: body.recipeVersionId, replaces_run_id: body.replacesRunId,
    night: body.night, note: body.note, result: JSON.stringify(result), measure: result.measure ? JSON.stringify(result.measure) : null, keep_fraction: result.keep.fraction, keep_count: result.keep.count, frames: result.facts.frameCount,
    fwhm_px: result.figures.fwhmPx, fwhm_err_px: result.figures.fwhmErrPx, scale_arcsec_per_px: pixel && focal ? ARCSEC_PER_RADIAN_UM_MM * pixel / focal : null, kind: result.kind,
  }
}

const megabytes = (bytes: number) => `${(bytes / 1e6).toLocaleString('en', { maximumFractionDigits: 1 })} MB`

/** Everything of the club counts, what is announced and what can still be restored as well. Called with the new files among the rows. */
async function holdQuota(trx: Db, clubId: string, quota: number, added: number): Promise<void> {
  const used = await trx('run_files as f').join('runs as r', 'r.id', 'f.run_id').where({ 'r.club_id': clubId }).sum({ bytes: 'f.size_bytes' }).first()
  const free = quota - Number(used?.bytes ?? 0) + added
  if (added > free) throw problem(413, 'quota', `The club's archive has room for ${megabytes(Math.max(0, free))} more; this run needs ${megabytes(added)}. File it without the raw capture, or ask your organiser for room.`)
}

type NewFile = Announcement['files'][number]

/** Makes the rows of a run those that are announced now; rows of the same file stay as they are. Returns the bytes that were added. */
async function setFiles(trx: Db, runId: string, files: NewFile[], already: Map<string, boolean>, actor: Actor): Promise<number> {
  const isSame = (row: { role: string, sha256: string, size_bytes: number }, file: NewFile) => row.role === file.role && row.sha256 === file.sha256 && Number(row.size_bytes) === file.sizeBytes
  const rows = await trx('run_files').where({ run_id: runId })
  const gone = rows.filter(row => row.state === 'refused' || !files.some(file => isSame(row, file)))
  if (gone.length) await trx('run_files').whereIn('id', gone.map(row => row.id)).delete()
  const kept = rows.filter(row => !gone.includes(row))
  const fresh = files.filter(file => !kept.some(row => isSame(row, file)))
  for (const file of fresh) {
    // Bytes that the same person has already brought need not come again; a stranger's knowledge of a hash opens nothing.
    // The lock keeps the other row, and with it the stored file, until this one is written.
    const own = already.get(file.sha256) && await trx('run_files as f').join('runs as r', 'r.id', 'f.run_id').where({ 'f.sha256': file.sha256, 'f.state': 'received', 'r.owner_id': actor.id }).forUpdate().first('f.id')
    await trx('run_files').insert({
      id: newId(), run_id: runId, role: file.role, name: cleanName(file.name), size_bytes: file.sizeBytes, sha256: file.sha256, type: typeOf(file.role),
      state: own ? 'received' : 'announced', received_at: own ? new Date() : null,
    })
  }
  return fresh.reduce((sum, file) => sum + file.sizeBytes, 0) - gone.reduce((sum, row) => sum + Number(row.size_bytes), 0)
}

export async function targetOf(trx: Db, clubId: string, name: string, kind: string): Promise<string> {
  const there = await trx('targets').where({ club_id: clubId, name }).first('id')
  if (there) return there.id
  const id = newId()
  await trx('targets').insert({ id, club_id: clubId, name, kind, note: '', created_at: new Date() })
  return id
}

async function captureOf(trx: Db, clubId: string, facts: Announcement['result']['facts']): Promise<string> {
  const there = await trx('captures').where({ club_id: clubId, fingerprint: facts.fingerprint }).first('id')
  if (there) return there.id
  const id = newId()
  await trx('captures').insert({ id, club_id: clubId, fingerprint: facts.fingerprint, name: facts.name.slice(0, 255), size_bytes: facts.sizeBytes, created_at: new Date() })
  return id
}
