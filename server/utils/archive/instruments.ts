/** Instruments and targets of the club. */
import type { z } from 'zod'
import type { Instrument, instrumentBody, Target, targetBody } from '../../../shared/api/archive'
import { mayWith } from '../access'
import { audit } from '../audit'
import type { Db } from '../db'
import { useDb } from '../db'
import { notFound, problem, texts } from '../errors'
import type { Actor } from '../session'
import { newId } from '../tokens'
import { targetOf } from './announce'

const columnsOf = (body: z.output<typeof instrumentBody>) => ({
  name: body.name, aperture_mm: body.apertureMm, focal_length_mm: body.focalLengthMm, obstruction: body.obstruction, pixel_size_um: body.pixelSizeUm, filter: body.filter, wavelength_nm: body.wavelengthNm,
})

const instrumentsQuery = (db: Db, actor: Actor) => db('instruments as i').join('users as u', 'u.id', 'i.owner_id').where('i.club_id', actor.clubId).whereNull('i.deleted_at').select('i.*', 'u.name as owner_name')

function instrumentOf(actor: Actor, row: Record<string, unknown>): Instrument {
  return {
    id: row.id as string, ownerId: row.owner_id as string, ownerName: row.owner_name as string, mine: row.owner_id === actor.id, name: row.name as string,
    apertureMm: row.aperture_mm as number, focalLengthMm: row.focal_length_mm as number, obstruction: row.obstruction as number, pixelSizeUm: row.pixel_size_um as number, filter: row.filter as string, wavelengthNm: row.wavelength_nm as number,
  }
}

export async function listInstruments(actor: Actor): Promise<Instrument[]> {
  return (await instrumentsQuery(useDb(), actor).orderBy([{ column: 'i.name' }, { column: 'i.id' }]).limit(1000)).map(row => instrumentOf(actor, row))
}

async function readInstrument(actor: Actor, id: string): Promise<Instrument> {
  const row = await instrumentsQuery(useDb(), actor).where('i.id', id).first()
  if (!row) throw notFound()
  return instrumentOf(actor, row)
}

export async function createInstrument(actor: Actor, body: z.output<typeof instrumentBody>): Promise<Instrument> {
  const id = newId()
  await useDb().transaction(async (trx) => {
    await trx('instruments').insert({ id, club_id: actor.clubId, owner_id: actor.id, ...columnsOf(body), created_at: new Date() })
    await audit(trx, { clubId: actor.clubId, userId: actor.id, actor: actor.name, action: 'added an instrument', kind: 'instrument', id, detail: body.name })
  })
  return readInstrument(actor, id)
}

async function ownInstrument(trx: Db, actor: Actor, id: string) {
  const row = await trx('instruments').where({ id, club_id: actor.clubId }).whereNull('deleted_at').forUpdate().first()
  if (!row) throw notFound()
  if (!mayWith(actor, 'instrument.write', { ownerId: row.owner_id, clubId: row.club_id })) throw problem(403, 'not-allowed', texts.notAllowed)
}

export async function changeInstrument(actor: Actor, id: string, body: z.output<typeof instrumentBody>): Promise<Instrument> {
  await useDb().transaction(async (trx) => {
    await ownInstrument(trx, actor, id)
    await trx('instruments').where({ id }).update(columnsOf(body))
    await audit(trx, { clubId: actor.clubId, userId: actor.id, actor: actor.name, action: 'changed an instrument', kind: 'instrument', id, detail: body.name })
  })
  return readInstrument(actor, id)
}

export async function deleteInstrument(actor: Actor, id: string): Promise<void> {
  await useDb().transaction(async (trx) => {
    await ownInstrument(trx, actor, id)
    await trx('instruments').where({ id }).update({ deleted_at: new Date() })
    await audit(trx, { clubId: actor.clubId, userId: actor.id, actor: actor.name, action: 'removed an instrument', kind: 'instrument', id })
  })
}

export async function listTargets(actor: Actor): Promise<Target[]> {
  const rows = await useDb()('targets as t').leftJoin('runs as r', function () {
    this.on('r.target_id', 't.id').andOnVal('r.state', 'filed')
  }).where('t.club_id', actor.clubId).groupBy('t.id').orderBy('t.name').select('t.*').count({ runs: 'r.id' }).limit(2000) as unknown as (Target & { runs: number })[]
  return rows.map(({ id, name, kind, note, runs }) => ({ id, name, kind, note, runs: Number(runs) }))
}

export async function createTarget(actor: Actor, { name, kind, note }: z.output<typeof targetBody>): Promise<Target> {
  return useDb().transaction(async (trx) => {
    if (await trx('targets').where({ club_id: actor.clubId, name }).first('id')) throw problem(409, 'exists', 'The club has a target of this name already.', { field: 'name' })
    const id = await targetOf(trx, actor.clubId, name, kind)
    await trx('targets').where({ id }).update({ note })
    await audit(trx, { clubId: actor.clubId, userId: actor.id, actor: actor.name, action: 'added a target', kind: 'target', id, detail: name })
    return { id, name, kind, note, runs: 0 }
  })
}
