/**
 * Who asks. The sealed cookie carries only the id of a row; the row is what counts, so that signing out, a
 * changed password or a member set inactive end a session at once, wherever its cookie was copied to.
 */
import type { H3Event } from 'h3'
import type { Me, Role } from '../../shared/api/account'
import { useDb } from './db'
import { problem, texts } from './errors'
import { newId } from './tokens'

const DAY = 86_400_000
export const IDLE_LIMIT_MS = 7 * DAY
export const ABSOLUTE_LIMIT_MS = 14 * DAY
/** The row is written at most this often. */
const SEEN_STEP_MS = 60_000

export interface Actor extends Me { sessionId: string }

/** Whether a session may still be used, by its row's times. Pure, so that limits can be proven with any clock. */
export function sessionLives(row: { created_at: Date, seen_at: Date }, now: Date): boolean {
  return now.getTime() - row.seen_at.getTime() < IDLE_LIMIT_MS && now.getTime() - row.created_at.getTime() < ABSOLUTE_LIMIT_MS
}

/** Begins a session for a user, in place of whatever this browser had. */
export async function beginSession(event: H3Event, userId: string): Promise<void> {
  const now = new Date()
  const id = newId()
  const old = await sessionIdOf(event)
  const db = useDb()
  if (old) await db('sessions').where({ id: old }).delete()
  await db('sessions').insert({ id, user_id: userId, created_at: now, seen_at: now })
  await db('users').where({ id: userId }).update({ last_seen_at: now })
  await replaceUserSession(event, { user: {}, secure: { sid: id } })
}

export async function endSession(event: H3Event): Promise<void> {
  const id = await sessionIdOf(event)
  if (id) await useDb()('sessions').where({ id }).delete()
  await clearUserSession(event)
}

async function sessionIdOf(event: H3Event): Promise<string | null> {
  const session = await getUserSession(event)
  const sid = (session.secure as { sid?: unknown } | undefined)?.sid
  return typeof sid === 'string' ? sid : null
}

/** The signed-in actor, or null. Looked up once for each request. */
export async function currentActor(event: H3Event): Promise<Actor | null> {
  if (event.context.actor !== undefined) return event.context.actor as Actor | null
  const actor = await findActor(event)
  event.context.actor = actor
  return actor
}

async function findActor(event: H3Event): Promise<Actor | null> {
  const sid = await sessionIdOf(event)
  if (!sid) return null
  const db = useDb()
  const row = await db('sessions as s').join('users as u', 'u.id', 's.user_id').join('memberships as m', 'm.user_id', 'u.id').join('clubs as c', 'c.id', 'm.club_id')
    .where('s.id', sid).where('m.active', true)
    .first('s.created_at', 's.seen_at', 'u.id', 'u.name', 'u.email', 'm.role', 'c.id as club_id', 'c.name as club_name')
  if (!row) return null
  const now = new Date()
  if (!sessionLives(row, now)) {
    await db('sessions').where({ id: sid }).delete()
    return null
  }
  if (now.getTime() - row.seen_at.getTime() > SEEN_STEP_MS) {
    await db('sessions').where({ id: sid }).update({ seen_at: now })
    await db('users').where({ id: row.id }).update({ last_seen_at: now })
  }
  return { sessionId: sid, id: row.id, name: row.name, email: row.email, role: row.role as Role, clubId: row.club_id, clubName: row.club_name }
}

export async function requireActor(event: H3Event): Promise<Actor> {
  const actor = await currentActor(event)
  if (!actor) throw problem(401, 'signed-out', texts.signInFirst)
  return actor
}

export function meOf({ id, name, email, role, clubId, clubName }: Actor): Me {
  return { id, name, email, role, clubId, clubName }
}
