/** What the seeding reads and writes in the database itself: whether the demo is complete. */
import { randomBytes } from 'node:crypto'
import createKnex, { type Knex } from 'knex'
import { demoClub } from '../../shared/demo'

/** The audit trail says when the demo was complete; whoever deletes parts of it later does not get them back. */
export async function isSeeded(db: Knex): Promise<boolean> {
  return (await db('audit_events').where({ action: 'demo.seeded' }).first('id')) !== undefined
}

/** False where the database belongs to a club of its own: nothing may be seeded there. */
export async function hasDemoClub(db: Knex): Promise<boolean> {
  return (await db('clubs').where({ name: demoClub }).first('id')) !== undefined
}

export async function markSeeded(db: Knex): Promise<void> {
  const club = await db('clubs').where({ name: demoClub }).first<{ id: string }>('id')
  await db('audit_events').insert({
    id: randomBytes(16).toString('base64url'), club_id: club.id, user_id: null, actor: 'Lull', action: 'demo.seeded',
    subject_kind: 'club', subject_id: club.id, detail: 'The demo is complete.', at: new Date(),
  })
}

export function openDatabase(url: string): Knex {
  return createKnex({ client: 'mysql2', connection: { uri: url, charset: 'utf8mb4', timezone: 'Z' } as Knex.MySql2ConnectionConfig, pool: { min: 0, max: 2 } })
}
