/** Access to instruments, targets, runs, their files, links and reviews, and to recipes. Things belong to `member`. */
import { createHash, randomBytes } from 'node:crypto'
import { mkdir, writeFile } from 'node:fs/promises'
import path from 'node:path'
import { inject } from 'vitest'
import { canonicalJson } from '../../../shared/recipe/canonical'
import { defaultRecipe } from '../../../shared/schemas/recipe'
import { newId, type ActorName, type World } from '../world'
import { anyone, clubMembers, mentors, ownerOnly, signedIn, type AccessRow } from './row'

const hex = (text: string | Buffer) => createHash('sha256').update(text).digest('hex')
const recipeJson = canonicalJson(defaultRecipe)
const instrument = { name: 'Practice tube', apertureMm: 200, focalLengthMm: 3000, obstruction: 0.3, pixelSizeUm: 3.75, filter: 'green', wavelengthNm: 550 }

async function makeInstrument({ db, clubId, people }: World): Promise<string> {
  const id = newId()
  await db('instruments').insert({ id, club_id: clubId, owner_id: people.member.id, name: 'Practice tube', aperture_mm: 200, focal_length_mm: 3000, obstruction: 0.3, pixel_size_um: 3.75, filter: 'green', wavelength_nm: 550, created_at: new Date() })
  return id
}

async function makeRecipe({ db, clubId, people }: World, shared: boolean): Promise<string> {
  const id = newId()
  const now = new Date()
  await db('recipes').insert({ id, club_id: clubId, owner_id: people.member.id, name: 'Practice', description: '', shared, created_at: now, updated_at: now })
  await db('recipe_versions').insert({ id: newId(), recipe_id: id, version: 1, recipe: recipeJson, recipe_hash: hex(recipeJson), note: '', author_id: people.member.id, created_at: now })
  return id
}

/** A run of `member` with one stored file; enough for every route that does not look into the files. */
export async function makeRun({ db, clubId, people }: World, more: Record<string, unknown> = {}): Promise<{ id: string, fileId: string, rawId: string }> {
  const [id, targetId, captureId] = [newId(), newId(), newId()]
  const now = new Date()
  await db('targets').insert({ id: targetId, club_id: clubId, name: `Target ${targetId}`, kind: 'star', note: '', created_at: now })
  await db('captures').insert({ id: captureId, club_id: clubId, fingerprint: hex(captureId), name: 'capture.ser', size_bytes: 1000, created_at: now })
  const result = { recipe: defaultRecipe, recipeHash: hex(recipeJson), kind: 'star', ladder: { counts: [1], width: 64, height: 64, planes: 1 } }
  await db('runs').insert({
    id, club_id: clubId, owner_id: people.member.id, target_id: targetId, capture_id: captureId, state: 'filed', night: '2031-03-04', note: '', result: JSON.stringify(result),
    recipe_hash: hex(recipeJson), keep_fraction: 0.1, keep_count: 10, frames: 100, kind: 'star', review_state: 'none', created_at: now, filed_at: now, ...more,
  })
  const [fileId, rawId] = [await makeFile(db, id, 'stack'), await makeFile(db, id, 'raw')]
  return { id, fileId, rawId }
}

async function makeFile(db: World['db'], runId: string, role: string): Promise<string> {
  const id = newId()
  const bytes = randomBytes(100)
  const place = path.join(inject('lull').folder, 'store', hex(bytes).slice(0, 2))
  await mkdir(place, { recursive: true })
  await writeFile(path.join(place, hex(bytes)), bytes)
  await db('run_files').insert({ id, run_id: runId, role, name: `${role}.fits`, size_bytes: bytes.length, sha256: hex(bytes), type: 'application/fits', state: 'received', received_at: new Date() })
  return id
}

export async function makeLink({ db, people }: World, runId: string, more: Record<string, unknown> = {}): Promise<{ id: string, token: string }> {
  const [id, token] = [newId(), randomBytes(32).toString('base64url')]
  await db('share_links').insert({ id, run_id: runId, token_hash: hex(token), scope: 'remark', created_by: people.member.id, created_at: new Date(), expires_at: new Date(Date.now() + 3_600_000), ...more })
  return { id, token }
}

async function makeReview({ db, people }: World, runId: string): Promise<void> {
  await db('reviews').insert({ id: newId(), run_id: runId, asked_by: people.member.id, asked_at: new Date(), text: '', verdict_text: '' })
  await db('runs').where({ id: runId }).update({ review_state: 'waiting' })
}

/** A request about a new run. */
const ofRun = (tail: string, body?: unknown, more: Record<string, unknown> = {}) => async (world: World) => ({ path: `/api/runs/${(await makeRun(world, more)).id}${tail}`, ...(body === undefined ? {} : { body }) })
const deleted = { state: 'deleted', deleted_at: new Date() }
const tus = { 'tus-resumable': '1.0.0' }

const runRows: AccessRow[] = [
  { method: 'GET', route: '/api/runs', ask: () => ({ path: '/api/runs' }), expect: signedIn(200) },
  { method: 'GET', route: '/api/runs/export', ask: () => ({ path: '/api/runs/export' }), expect: signedIn(200) },
  { method: 'POST', route: '/api/runs', ask: () => ({ path: '/api/runs', body: {} }), expect: signedIn(400) },
  { method: 'GET', route: '/api/runs/:id', ask: ofRun(''), expect: clubMembers(200) },
  // One that is not filed yet exists for its owner alone.
  { method: 'GET', route: '/api/runs/:id', ask: ofRun('', undefined, { state: 'announced', filed_at: null }), expect: ownerOnly(200, 404) },
  { method: 'PATCH', route: '/api/runs/:id', ask: ofRun('', { note: 'Changed' }), expect: ownerOnly(200) },
  { method: 'DELETE', route: '/api/runs/:id', ask: ofRun(''), expect: ownerOnly(204) },
  { method: 'POST', route: '/api/runs/:id/file', ask: ofRun('/file', {}), expect: ownerOnly(200) },
  { method: 'POST', route: '/api/runs/:id/restore', ask: ofRun('/restore', {}, deleted), expect: ownerOnly(200, 404) },
  {
    method: 'GET', route: '/api/runs/:id/files/:fileId', expect: clubMembers(200),
    ask: async (world) => { const run = await makeRun(world); return { path: `/api/runs/${run.id}/files/${run.fileId}` } },
  },
  {
    method: 'HEAD', route: '/api/runs/:id/files/:fileId', expect: clubMembers(200),
    ask: async (world) => { const run = await makeRun(world); return { path: `/api/runs/${run.id}/files/${run.fileId}` } },
  },
  { method: 'GET', route: '/api/runs/:id/links', ask: ofRun('/links'), expect: ownerOnly(200) },
  { method: 'POST', route: '/api/runs/:id/links', ask: ofRun('/links', { scope: 'look', days: 7 }), expect: ownerOnly(201) },
  {
    method: 'DELETE', route: '/api/runs/:id/links/:linkId', expect: ownerOnly(204),
    ask: async (world) => { const { id } = await makeRun(world); return { path: `/api/runs/${id}/links/${(await makeLink(world, id)).id}` } },
  },
  { method: 'POST', route: '/api/runs/:id/review', ask: ofRun('/review', {}), expect: ownerOnly(201) },
  { method: 'POST', route: '/api/runs/:id/pins', ask: ofRun('/pins', { x: 3, y: 4, text: 'Here' }), expect: clubMembers(201) },
  { method: 'POST', route: '/api/runs/:id/remarks', ask: ofRun('/remarks', { text: 'Well done' }), expect: clubMembers(201) },
  { method: 'POST', route: '/api/runs/:id/proposals', ask: ofRun('/proposals', { recipe: { ...defaultRecipe, keep: { fraction: 0.037 } } }), expect: mentors(201) },
  {
    method: 'POST', route: '/api/runs/:id/verdict', expect: mentors(200),
    ask: async (world) => { const { id } = await makeRun(world); await makeReview(world, id); return { path: `/api/runs/${id}/verdict`, body: { verdict: 'accepted' } } },
  },
  { method: 'GET', route: '/api/reviews', ask: () => ({ path: '/api/reviews' }), expect: signedIn(200) },
]

/** A share link opens its one run for whoever holds it, and nothing else. */
const shared = (tail: (run: { fileId: string, rawId: string }) => string, body?: unknown, more: Record<string, unknown> = {}) => async (world: World) => {
  const run = await makeRun(world)
  return { path: `/api/share/${(await makeLink(world, run.id, more)).token}${tail(run)}`, ...(body === undefined ? {} : { body }) }
}
const pin = { x: 1, y: 2, text: 'Here', guestName: 'A guest' }
const over = { expires_at: new Date(Date.now() - 1000) }

const shareRows: AccessRow[] = [
  { method: 'GET', route: '/api/share/:token', ask: shared(() => ''), expect: anyone(200) },
  { method: 'GET', route: '/api/share/:token', ask: shared(() => '', undefined, over), expect: anyone(404) },
  { method: 'GET', route: '/api/share/:token', ask: shared(() => '', undefined, { withdrawn_at: new Date() }), expect: anyone(404) },
  { method: 'GET', route: '/api/share/:token/files/:fileId', ask: shared(run => `/files/${run.fileId}`), expect: anyone(200) },
  { method: 'GET', route: '/api/share/:token/files/:fileId', ask: shared(run => `/files/${run.rawId}`), expect: anyone(404) },
  { method: 'HEAD', route: '/api/share/:token/files/:fileId', ask: shared(run => `/files/${run.fileId}`), expect: anyone(200) },
  { method: 'HEAD', route: '/api/share/:token/files/:fileId', ask: shared(run => `/files/${run.rawId}`), expect: anyone(404) },
  {
    method: 'GET', route: '/api/share/:token/files/:fileId', expect: anyone(404),
    ask: async (world) => { const [one, other] = [await makeRun(world), await makeRun(world)]; return { path: `/api/share/${(await makeLink(world, one.id)).token}/files/${other.fileId}` } },
  },
  { method: 'POST', route: '/api/share/:token/pins', ask: shared(() => '/pins', pin), expect: anyone(201) },
  { method: 'POST', route: '/api/share/:token/pins', ask: shared(() => '/pins', pin, { scope: 'look' }), expect: anyone(403) },
  { method: 'POST', route: '/api/share/:token/remarks', ask: shared(() => '/remarks', { text: 'Fine', guestName: 'A guest' }), expect: anyone(201) },
  { method: 'POST', route: '/api/share/:token/remarks', ask: shared(() => '/remarks', { text: 'Fine', guestName: 'A guest' }, over), expect: anyone(404) },
]

const calibration = {
  name: 'Drift in March',
  data: { method: 'drift', scaleArcsecPerPx: 0.25, scaleErr: 0.001, northAngleDeg: 12, angleErr: 0.2, parity: 'normal', equinox: 'date', capture: 'drift.ser', takenAt: null, declinationDeg: 30, frames: 200, lengthPx: 400 },
}
async function makeCalibration({ db, people, clubId }: World): Promise<string> {
  const id = newId()
  await db('calibrations').insert({ id, club_id: clubId, owner_id: people.member.id, name: calibration.name, data: JSON.stringify(calibration.data), created_at: new Date() })
  return id
}

const ofInstrument = (body?: unknown) => async (world: World) => ({ path: `/api/instruments/${await makeInstrument(world)}`, ...(body === undefined ? {} : { body }) })
const ofRecipe = (isShared: boolean, tail: string, body?: unknown) => async (world: World) => ({ path: `/api/recipes/${await makeRecipe(world, isShared)}${tail}`, ...(body === undefined ? {} : { body }) })
const recipe = { name: 'Mine', recipe: defaultRecipe }
const version = { recipe: { ...defaultRecipe, keep: { fraction: 0.041 } } }

const thingRows: AccessRow[] = [
  { method: 'GET', route: '/api/instruments', ask: () => ({ path: '/api/instruments' }), expect: signedIn(200) },
  { method: 'POST', route: '/api/instruments', ask: () => ({ path: '/api/instruments', body: instrument }), expect: signedIn(201) },
  { method: 'PATCH', route: '/api/instruments/:id', ask: ofInstrument(instrument), expect: ownerOnly(200) },
  { method: 'DELETE', route: '/api/instruments/:id', ask: ofInstrument(), expect: ownerOnly(204) },
  { method: 'GET', route: '/api/measures', ask: () => ({ path: '/api/measures' }), expect: signedIn(200) },
  { method: 'GET', route: '/api/measures/export', ask: () => ({ path: '/api/measures/export' }), expect: signedIn(200) },
  { method: 'GET', route: '/api/calibrations', ask: () => ({ path: '/api/calibrations' }), expect: signedIn(200) },
  { method: 'POST', route: '/api/calibrations', ask: () => ({ path: '/api/calibrations', body: calibration }), expect: signedIn(201) },
  { method: 'DELETE', route: '/api/calibrations/:id', ask: async (world: World) => ({ path: `/api/calibrations/${await makeCalibration(world)}` }), expect: ownerOnly(204) },
  { method: 'GET', route: '/api/targets', ask: () => ({ path: '/api/targets' }), expect: signedIn(200) },
  { method: 'POST', route: '/api/targets', ask: (_: World, actor: ActorName) => ({ path: '/api/targets', body: { name: `New target of ${actor}`, kind: 'star' } }), expect: signedIn(201) },
  { method: 'GET', route: '/api/recipes', ask: () => ({ path: '/api/recipes' }), expect: signedIn(200) },
  { method: 'POST', route: '/api/recipes', ask: () => ({ path: '/api/recipes', body: recipe }), expect: signedIn(201) },
  { method: 'GET', route: '/api/recipes/:id', ask: ofRecipe(true, ''), expect: clubMembers(200) },
  { method: 'GET', route: '/api/recipes/:id', ask: ofRecipe(false, ''), expect: ownerOnly(200, 404) },
  { method: 'PATCH', route: '/api/recipes/:id', ask: ofRecipe(true, '', { name: 'Renamed' }), expect: ownerOnly(200) },
  { method: 'PATCH', route: '/api/recipes/:id', ask: ofRecipe(false, '', { name: 'Renamed' }), expect: ownerOnly(200, 404) },
  { method: 'DELETE', route: '/api/recipes/:id', ask: ofRecipe(true, ''), expect: ownerOnly(204) },
  { method: 'POST', route: '/api/recipes/:id/versions', ask: ofRecipe(true, '/versions', version), expect: ownerOnly(201) },
  { method: 'POST', route: '/api/recipes/:id/fork', ask: ofRecipe(true, '/fork', {}), expect: clubMembers(201) },
  { method: 'POST', route: '/api/recipes/:id/fork', ask: ofRecipe(false, '/fork', {}), expect: ownerOnly(201, 404) },
]

const uploadRows: AccessRow[] = [
  { method: 'GET', route: '/files', ask: () => ({ path: '/files', headers: tus }), expect: anyone(405) },
  { method: 'POST', route: '/files', ask: () => ({ path: '/files', headers: { ...tus, 'upload-length': '10', 'upload-metadata': `fileId ${Buffer.from(newId()).toString('base64')}` } }), expect: signedIn(404) },
  { method: 'GET', route: '/files/**', ask: () => ({ path: `/files/${newId()}`, headers: tus }), expect: anyone(405) },
  { method: 'HEAD', route: '/files/**', ask: () => ({ path: `/files/${newId()}`, headers: tus }), expect: signedIn(404) },
  { method: 'PATCH', route: '/files/**', ask: () => ({ path: `/files/${newId()}`, headers: { ...tus, 'upload-offset': '0', 'content-type': 'application/offset+octet-stream' }, raw: Buffer.from('x') }), expect: signedIn(404) },
  { method: 'DELETE', route: '/files/**', ask: () => ({ path: `/files/${newId()}`, headers: tus }), expect: signedIn(404) },
]

export const archiveRows: AccessRow[] = [...thingRows, ...runRows, ...shareRows, ...uploadRows]
