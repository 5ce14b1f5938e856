/** One row of the access table: a method and a route, what is asked, and the status that each actor gets. */
import type { ActorName, World } from '../world'
import { actorNames } from '../world'

export interface Asked { path: string, body?: unknown, headers?: Record<string, string>, raw?: Buffer }

export interface AccessRow {
  method: string
  /** As the files under server/ name it: `/api/runs/:id`. */
  route: string
  /** Makes what this one request needs (a fresh thing for each actor), and says what is sent. */
  ask: (world: World, actor: ActorName) => Asked | Promise<Asked>
  expect: Record<ActorName, number>
  /** The request ends or replaces the asker's session: it is made with a session of its own. */
  ownSession?: boolean
}

const each = (status: (actor: ActorName) => number) => Object.fromEntries(actorNames.map(actor => [actor, status(actor)])) as Record<ActorName, number>
const hasAccount = (actor: ActorName) => actor !== 'anonymous' && actor !== 'guest'

/** The same for all. */
export const anyone = (status: number) => each(() => status)
/** Whoever has an account, each in their own club. */
export const signedIn = (status: number) => each(actor => hasAccount(actor) ? status : 401)
/** Organisers, each of their own club. */
export const organisers = (status: number) => each(actor => !hasAccount(actor) ? 401 : actor === 'organiser' || actor === 'foreignOrganiser' ? status : 403)
/** A thing of the first club, for its organiser only. Whoever is organiser elsewhere is told that it does not exist. */
export const ownOrganiser = (status: number) => ({ ...organisers(status), foreignOrganiser: 404 })
/** A thing of the first club that all its members may see. */
export const clubMembers = (status: number) => each(actor => !hasAccount(actor) ? 401 : actor.startsWith('foreign') ? 404 : status)
/** A thing that `member` owns: others of the club see it and may not change it; for other clubs it does not exist. */
export const ownerOnly = (status: number, others = 403) => ({ ...clubMembers(others), member: status })
/** Mentors and the organiser of the club, about a thing of `member`. */
export const mentors = (status: number, others = 403) => ({ ...clubMembers(others), mentor: status, organiser: status })
