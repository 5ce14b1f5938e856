/** Two invented clubs with people in every role, made straight in the database; each call makes new ones. */
import { randomBytes, scryptSync } from 'node:crypto'
import type { Knex } from 'knex'
import { openDatabase } from '../../server/utils/db'
import type { Role } from '../../shared/api/account'
import { Client, currentServer } from './client'

export const PASSWORD = 'a password for tests'
/** PHC string format; N, r and p as the server makes them, so that signing in takes its usual road. */
const passwordHash = (() => {
  const salt = randomBytes(16)
  const text = (bytes: Buffer) => bytes.toString('base64').replace(/=+$/, '')
  return `$scrypt$n=16384,r=8,p=1$${text(salt)}$${text(scryptSync(PASSWORD, salt, 64, { N: 16384, r: 8, p: 1, maxmem: 2 ** 26 }))}`
})()

export const newId = () => randomBytes(16).toString('base64url')

/** A person with a session of their own. `client` is made by signing in through the API. */
export interface TestPerson { id: string, clubId: string, name: string, email: string, role: Role, client: Client }

let db: Knex | null = null
export const useTestDb = (): Knex => (db ??= openDatabase(currentServer().databaseUrl))
export async function closeTestDb(): Promise<void> {
  await db?.destroy()
  db = null
}

export async function makeClub(name = `Club ${newId().slice(0, 6)}`): Promise<string> {
  const id = newId()
  await useTestDb()('clubs').insert({ id, name, quota_bytes: 2 ** 30, created_at: new Date() })
  return id
}

export async function makePerson(clubId: string, role: Role, name: string): Promise<TestPerson> {
  const id = newId()
  const email = `${name.toLowerCase()}-${newId().slice(0, 8).toLowerCase().replaceAll(/[^a-z0-9]/g, 'x')}@test.example`
  const now = new Date()
  await useTestDb()('users').insert({ id, email, name, password_hash: passwordHash, created_at: now })
  await useTestDb()('memberships').insert({ club_id: clubId, user_id: id, role, active: true, joined_at: now })
  return { id, clubId, name, email, role, client: await Client.signedIn(email, PASSWORD) }
}

export const actorNames = ['anonymous', 'guest', 'member', 'otherMember', 'mentor', 'organiser', 'foreignMember', 'foreignOrganiser'] as const
export type ActorName = typeof actorNames[number]
export type PersonName = Exclude<ActorName, 'anonymous' | 'guest'>

export interface World {
  db: Knex
  clubId: string
  foreignClubId: string
  people: Record<PersonName, TestPerson>
  /** The client of an actor. The guest has no account: what they may do hangs on the token in the address. */
  as(actor: ActorName): Client
}

export async function makeWorld(): Promise<World> {
  const [clubId, foreignClubId] = [await makeClub(), await makeClub()]
  const people = {
    member: await makePerson(clubId, 'member', 'Wilma'), otherMember: await makePerson(clubId, 'member', 'Osric'), mentor: await makePerson(clubId, 'mentor', 'Thea'),
    organiser: await makePerson(clubId, 'organiser', 'Rufus'), foreignMember: await makePerson(foreignClubId, 'member', 'Selma'), foreignOrganiser: await makePerson(foreignClubId, 'organiser', 'Edgar'),
  }
  return {
    db: useTestDb(), clubId, foreignClubId, people,
    as: actor => actor === 'anonymous' || actor === 'guest' ? new Client() : people[actor].client,
  }
}
