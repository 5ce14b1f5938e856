/** Runs as they are answered: summaries, lists and details. */
import type { z } from 'zod'
import type { LinkScope, RunDetail, RunFile, RunPage, RunRights, RunSummary, runQuery } from '../../../shared/api/archive'
import type { FileRole, ReviewState, RunState } from '../../../shared/schemas/run'
import type { TargetKind } from '../../../shared/schemas/capture'
import { mayWith } from '../access'
import type { Db } from '../db'
import { useDb } from '../db'
import { notFound } from '../errors'
import type { Actor } from '../session'
import { discussionOf } from '../review/discussion'
import type { FileRow } from './receive'
import { storedResult } from './result'

/** Deleted runs can be restored for so long. */
export const RESTORE_MS = 30 * 86_400_000

export function runsQuery(db: Db) {
  return db('runs as r').join('users as u', 'u.id', 'r.owner_id').join('targets as t', 't.id', 'r.target_id')
    .leftJoin('instruments as i', 'i.id', 'r.instrument_id').leftJoin('recipe_versions as v', 'v.id', 'r.recipe_version_id').leftJoin('recipes as q', 'q.id', 'v.recipe_id')
}

/** All of a run's row but what only its page shows: a list of them must not carry every result along. */
export const summaryColumns = [
  ...['id', 'club_id', 'owner_id', 'target_id', 'instrument_id', 'replaces_run_id', 'state', 'night', 'keep_fraction', 'keep_count', 'frames', 'fwhm_px', 'fwhm_err_px', 'scale_arcsec_per_px', 'review_state', 'created_at', 'filed_at', 'deleted_at'].map(name => `r.${name}`),
  'u.name as owner_name', 't.name as target_name', 't.kind as target_kind', 'i.name as instrument_name', 'v.version as recipe_version', 'q.id as recipe_id', 'q.name as recipe_name', 'q.fork_of_version_id',
]

export interface RunRow {
  id: string, club_id: string, owner_id: string, owner_name: string, target_id: string, target_name: string, target_kind: TargetKind, instrument_id: string | null, instrument_name: string | null
  recipe_id: string | null, recipe_name: string | null, recipe_version: number | null, fork_of_version_id: string | null, replaces_run_id: string | null
  state: RunState, night: Date | string, keep_fraction: number, keep_count: number, frames: number, fwhm_px: number | null, fwhm_err_px: number | null
  scale_arcsec_per_px: number | null, review_state: ReviewState, created_at: Date, filed_at: Date | null, deleted_at: Date | null
}

/** The row of one run, with what its page shows. */
export interface FullRunRow extends RunRow { note: string, result: string }
export const fullColumns = [...summaryColumns, 'r.note', 'r.result']

const dayOf = (night: Date | string) => (typeof night === 'string' ? night.slice(0, 10) : night.toISOString().slice(0, 10))

export function summaryOf(row: RunRow, thumbnailUrl: string | null, replacedByRunId: string | null): RunSummary {
  return {
    id: row.id, state: row.state, target: { id: row.target_id, name: row.target_name, kind: row.target_kind }, owner: { id: row.owner_id, name: row.owner_name },
    instrument: row.instrument_id ? { id: row.instrument_id, name: row.instrument_name! } : null,
    night: dayOf(row.night), filedAt: row.filed_at?.toISOString() ?? null, createdAt: row.created_at.toISOString(), deletedAt: row.deleted_at?.toISOString() ?? null,
    recipe: row.recipe_id ? { id: row.recipe_id, name: row.recipe_name!, version: row.recipe_version!, forked: row.fork_of_version_id !== null } : null,
    keep: { fraction: row.keep_fraction, count: row.keep_count }, frames: row.frames,
    fwhmPx: row.fwhm_px, fwhmErrPx: row.fwhm_err_px, scaleArcsecPerPx: row.scale_arcsec_per_px, review: row.review_state, thumbnailUrl, replacesRunId: row.replaces_run_id, replacedByRunId,
  }
}

/** Summaries of rows with their thumbnails, in the order of the rows. */
export async function summariesOf(rows: RunRow[]): Promise<RunSummary[]> {
  if (rows.length === 0) return []
  const thumbnails = await useDb()('run_files').whereIn('run_id', rows.map(row => row.id)).where({ role: 'thumbnail', state: 'received' }).select('id', 'run_id')
  const byRun = new Map(thumbnails.map(file => [file.run_id as string, file.id as string]))
  const replacedBy = await replacementsOf(rows.map(row => row.id))
  return rows.map(row => summaryOf(row, byRun.has(row.id) ? `/api/runs/${row.id}/files/${byRun.get(row.id)}` : null, replacedBy.get(row.id) ?? null))
}

/** The newest filed run that replaces each of these. */
async function replacementsOf(ids: string[]): Promise<Map<string, string>> {
  const newer = await useDb()('runs').whereIn('replaces_run_id', ids).where({ state: 'filed' }).orderBy([{ column: 'filed_at' }, { column: 'id' }]).select('id', 'replaces_run_id')
  return new Map(newer.map(run => [run.replaces_run_id as string, run.id as string]))
}

const sortColumns = { night: 'r.night', target: 't.name', owner: 'u.name', keep: 'r.keep_fraction', fwhm: 'r.fwhm_px', filed: 'r.filed_at', review: 'r.review_state' } as const

function filtered(actor: Actor, query: z.output<typeof runQuery>) {
  const found = runsQuery(useDb()).where({ 'r.club_id': actor.clubId, 'r.state': query.state })
  // What is not filed concerns only its owner.
  if (query.state !== 'filed') found.where('r.owner_id', actor.id)
  if (query.target) found.where('r.target_id', query.target)
  if (query.member) found.where('r.owner_id', query.member)
  if (query.instrument) found.where('r.instrument_id', query.instrument)
  if (query.kind) found.where('r.kind', query.kind)
  if (query.review) found.where('r.review_state', query.review)
  if (query.from) found.where('r.night', '>=', query.from)
  if (query.to) found.where('r.night', '<=', query.to)
  if (query.search) {
    const like = `%${query.search.replaceAll(/[\\%_]/g, '\\$&')}%`
    found.where(either => either.where('t.name', 'like', like).orWhere('u.name', 'like', like).orWhere('i.name', 'like', like).orWhere('q.name', 'like', like).orWhere('r.note', 'like', like))
  }
  return found
}

export async function findRuns(actor: Actor, query: z.output<typeof runQuery>, limit = query.pageSize): Promise<RunRow[]> {
  const column = sortColumns[query.state === 'filed' || query.sort !== 'filed' ? query.sort : 'filed']
  const found = filtered(actor, query).select(summaryColumns)
  // Missing figures come last in either direction; the id makes the order of equals the same on every page.
  if (query.sort === 'fwhm') found.orderByRaw('r.fwhm_px is null')
  return await found.orderBy([{ column: query.state === 'filed' ? column : query.sort === 'filed' ? 'r.created_at' : column, order: query.order }, { column: 'r.id', order: 'asc' }])
    .limit(limit).offset((query.page - 1) * query.pageSize) as RunRow[]
}

export async function listRuns(actor: Actor, query: z.output<typeof runQuery>): Promise<RunPage> {
  const counts = await filtered(actor, query).first().count({ total: '*' }).countDistinct({ nights: 'r.night' }) as unknown as { total: number, nights: number }
  const waiting = await useDb()('runs').where({ club_id: actor.clubId, state: 'filed', review_state: 'waiting' }).count({ n: '*' }).first() as { n: number }
  return { items: await summariesOf(await findRuns(actor, query)), total: Number(counts.total), nights: Number(counts.nights), waiting: Number(waiting.n), page: query.page, pageSize: query.pageSize }
}

/** The run of this id that the actor may see, or 404 (a foreign one and a missing one alike). */
export async function findRun(actor: Actor, id: string): Promise<FullRunRow> {
  const row = await runsQuery(useDb()).where({ 'r.id': id, 'r.club_id': actor.clubId }).first(fullColumns) as FullRunRow | undefined
  if (!row || !mayWith(actor, 'run.read', { ownerId: row.owner_id, clubId: row.club_id })) throw notFound()
  if (row.state !== 'filed' && row.owner_id !== actor.id) throw notFound()
  return row
}

export function rightsOf(actor: Actor, row: RunRow): RunRights {
  const thing = { ownerId: row.owner_id, clubId: row.club_id }
  const filed = row.state === 'filed'
  const owner = mayWith(actor, 'run.write', thing)
  return {
    edit: owner && row.state !== 'deleted', remove: owner && row.state !== 'deleted',
    restore: owner && row.state === 'deleted' && row.deleted_at !== null && Date.now() - row.deleted_at.getTime() < RESTORE_MS,
    share: filed && mayWith(actor, 'run.share', thing), askReview: filed && mayWith(actor, 'run.askReview', thing) && row.review_state !== 'waiting',
    remark: filed && mayWith(actor, 'run.remark', thing), judge: filed && mayWith(actor, 'run.judge', thing) && row.review_state === 'waiting',
    answer: filed && owner, download: filed || owner,
  }
}

const guestRights = (scope: LinkScope): RunRights => ({ edit: false, remove: false, restore: false, share: false, askReview: false, remark: scope === 'remark', judge: false, answer: false, download: true })

/** `open` says that the asker may still bring bytes. */
export function fileOf(row: FileRow, base: string, open: boolean): RunFile {
  return { id: row.id, role: row.role as FileRole, name: row.name, sizeBytes: Number(row.size_bytes), sha256: row.sha256, type: row.type, state: row.state, problem: row.problem, url: `${base}/files/${row.id}`, uploadUrl: open && row.state === 'announced' && row.upload_id ? `/files/${row.upload_id}` : null }
}

interface Viewer { base: string, rights: RunRights, guest: { scope: LinkScope, expiresAt: string } | null }

async function detail(row: FullRunRow, { base, rights, guest }: Viewer): Promise<RunDetail> {
  const db = useDb()
  const files = (await db('run_files').where({ run_id: row.id }).orderBy('role') as FileRow[]).filter(file => !guest || file.role !== 'raw')
  const thumbnail = files.find(file => file.role === 'thumbnail' && file.state === 'received')
  const replacedBy = guest ? null : (await replacementsOf([row.id])).get(row.id) ?? null
  const events = guest ? [] : await db('audit_events').where({ subject_kind: 'run', subject_id: row.id }).orderBy([{ column: 'at' }, { column: 'id' }]).limit(200)
  const summary = summaryOf(row, thumbnail ? `${base}/files/${thumbnail.id}` : null, replacedBy)
  return {
    ...summary,
    ...(guest ? { replacesRunId: null } : {}),
    note: row.note, result: storedResult(row.result), files: files.map(file => fileOf(file, base, !guest && row.state === 'announced')), rights,
    ...await discussionOf(row.id),
    history: events.map(event => ({ at: event.at.toISOString(), actor: event.actor, action: event.action, detail: event.detail })),
    link: guest,
  }
}

export async function runDetail(actor: Actor, id: string): Promise<RunDetail> {
  const row = await findRun(actor, id)
  return detail(row, { base: `/api/runs/${row.id}`, rights: rightsOf(actor, row), guest: null })
}

/** The run of a share link, without anything of the club beyond it. */
export async function guestDetail(runId: string, token: string, link: { scope: LinkScope, expiresAt: string }): Promise<RunDetail> {
  const row = await runsQuery(useDb()).where({ 'r.id': runId, 'r.state': 'filed' }).first(fullColumns) as FullRunRow | undefined
  if (!row) throw notFound()
  return detail(row, { base: `/api/share/${token}`, rights: guestRights(link.scope), guest: link })
}
