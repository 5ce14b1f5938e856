/** Calibrations of the club: made by members, used by all, removed by their owners. A measure keeps its own copy. */
import type { z } from 'zod'
import type { Calibration, calibrationBody } from '../../../shared/schemas/calibration'
import { mayWith } from '../access'
import { audit } from '../audit'
import type { Db } from '../db'
import { useDb } from '../db'
import { notFound, problem, texts } from '../errors'
import type { Actor } from '../session'
import { newId } from '../tokens'

const query = (db: Db, actor: Actor) => db('calibrations as c').join('users as u', 'u.id', 'c.owner_id').leftJoin('instruments as i', 'i.id', 'c.instrument_id')
  .where('c.club_id', actor.clubId).whereNull('c.deleted_at').select('c.*', 'u.name as owner_name', 'i.name as instrument_name')

function calibrationOf(actor: Actor, row: Record<string, unknown>): Calibration {
  return {
    id: row.id as string, name: row.name as string, ownerName: row.owner_name as string, mine: row.owner_id === actor.id,
    instrument: row.instrument_id ? { id: row.instrument_id as string, name: row.instrument_name as string } : null,
    createdAt: (row.created_at as Date).toISOString(), data: JSON.parse(row.data as string) as Calibration['data'],
  }
}

/** Newest first. */
export async function listCalibrations(actor: Actor): Promise<Calibration[]> {
  return (await query(useDb(), actor).orderBy([{ column: 'c.created_at', order: 'desc' }, { column: 'c.id' }]).limit(500)).map(row => calibrationOf(actor, row))
}

export async function createCalibration(actor: Actor, body: z.output<typeof calibrationBody>): Promise<Calibration> {
  const id = newId()
  await useDb().transaction(async (trx) => {
    if (body.instrumentId !== null && !await trx('instruments').where({ id: body.instrumentId, club_id: actor.clubId }).whereNull('deleted_at').first('id')) throw notFound()
    await trx('calibrations').insert({ id, club_id: actor.clubId, owner_id: actor.id, instrument_id: body.instrumentId, name: body.name, data: JSON.stringify(body.data), created_at: new Date() })
    await audit(trx, { clubId: actor.clubId, userId: actor.id, actor: actor.name, action: 'added a calibration', kind: 'calibration', id, detail: body.name })
  })
  return calibrationOf(actor, await query(useDb(), actor).where('c.id', id).first() as Record<string, unknown>)
}

export async function deleteCalibration(actor: Actor, id: string): Promise<void> {
  await useDb().transaction(async (trx) => {
    const row = await trx('calibrations').where({ id, club_id: actor.clubId }).whereNull('deleted_at').forUpdate().first()
    if (!row) throw notFound()
    if (!mayWith(actor, 'calibration.write', { ownerId: row.owner_id, clubId: row.club_id })) throw problem(403, 'not-allowed', texts.notAllowed)
    await trx('calibrations').where({ id }).update({ deleted_at: new Date() })
    await audit(trx, { clubId: actor.clubId, userId: actor.id, actor: actor.name, action: 'removed a calibration', kind: 'calibration', id, detail: row.name })
  })
}
