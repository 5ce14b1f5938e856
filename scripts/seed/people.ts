/** The demo's club and its members, written into the database: there is nobody yet who could invite them. */
import { randomBytes, scrypt } from 'node:crypto'
import createKnex, { type Knex } from 'knex'
import { clubName, people } from './scenario'

/** 64 MB: the cost parameters need 16 MB, Node's default limit is 32. */
const MAX_MEMORY = 64 * 2 ** 20
const QUOTA_BYTES = 20 * 2 ** 30

const newId = () => randomBytes(16).toString('base64url')

/** scrypt in the PHC string format, with the parameters that the server uses: N 16384, r 8, p 1, 64 bytes. */
async function passwordHash(password: string): Promise<string> {
  const salt = randomBytes(16)
  const key = await new Promise<Buffer>((resolve, reject) => {
    scrypt(password, salt, 64, { N: 16384, r: 8, p: 1, maxmem: MAX_MEMORY }, (error, derived) => (error ? reject(error) : resolve(derived)))
  })
  const text = (bytes: Buffer) => bytes.toString('base64').replace(/=+$/, '')
  return `$scrypt$n=16384,r=8,p=1$${text(salt)}$${text(key)}`
}

/** True where the database has a club that is not the demo's: then nothing may be seeded. */
export async function belongsToOthers(db: Knex): Promise<boolean> {
  const clubs = await db('clubs').select<{ name: string }[]>('name')
  return clubs.length > 0 && !clubs.some(({ name }) => name === clubName)
}

/** In one transaction: either the club and all its members are there, or none of them. */
export async function ensurePeople(db: Knex): Promise<void> {
  const hashes = new Map(await Promise.all(Object.values(people).map(async ({ email, password }) => [email, await passwordHash(password)] as const)))
  await db.transaction(async (step) => {
    if (await step('clubs').where({ name: clubName }).first('id')) return
    const now = new Date()
    const club = { id: newId(), name: clubName, quota_bytes: QUOTA_BYTES, created_at: now }
    await step('clubs').insert(club)
    for (const { name, email, role } of Object.values(people)) {
      const user = { id: newId(), email, name, password_hash: hashes.get(email)!, created_at: now }
      await step('users').insert(user)
      await step('memberships').insert({ club_id: club.id, user_id: user.id, role, active: true, joined_at: now })
    }
  })
}

/** The audit trail says when the demo was complete; whoever deletes parts of it later does not get them back. */
export async function isSeeded(db: Knex): Promise<boolean> {
  return (await db('audit_events').where({ action: 'demo.seeded' }).first('id')) !== undefined
}

export async function markSeeded(db: Knex): Promise<void> {
  const club = await db('clubs').where({ name: clubName }).first<{ id: string }>('id')
  await db('audit_events').insert({ id: newId(), club_id: club.id, user_id: null, actor: 'Lull', action: 'demo.seeded', subject_kind: 'club', subject_id: club.id, detail: 'The demo is complete.', at: new Date() })
}

export function openDatabase(url: string): Knex {
  return createKnex({ client: 'mysql2', connection: { uri: url, charset: 'utf8mb4', timezone: 'Z' } as Knex.MySql2ConnectionConfig, pool: { min: 0, max: 2 } })
}
