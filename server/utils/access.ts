/**
 * Who may do what to which thing. Every route asks here; tests/server/access-table.ts walks the routes for every
 * kind of actor.
 *
 * A thing of another club does not exist for the asker: look-ups are by club, and answer 404 as a missing one does.
 */
import type { Role } from '../../shared/api/account'

export interface Who { id: string, role: Role, clubId: string }
export interface OwnedThing { ownerId: string, clubId: string }

const isMentor = (who: Who) => who.role === 'mentor' || who.role === 'organiser'
const owns = (who: Who, thing: OwnedThing) => who.id === thing.ownerId && who.clubId === thing.clubId
const sameClub = (who: Who, thing: OwnedThing) => who.clubId === thing.clubId

/** Actions on the club as a whole. */
export const clubRules = {
  'club.read': () => true,
  'club.write': who => who.role === 'organiser',
  'invitations': who => who.role === 'organiser',
  'members.write': who => who.role === 'organiser',
  'mails.read': who => who.role === 'organiser',
  'audit.read': who => who.role === 'organiser',
  'reviews.queue': who => isMentor(who),
} satisfies Record<string, (who: Who) => boolean>

/** Actions on a thing that somebody owns: a run, a recipe, an instrument. */
export const thingRules = {
  'run.read': sameClub,
  'run.write': owns,
  'run.file': owns,
  'run.delete': owns,
  'run.share': owns,
  'run.askReview': owns,
  'run.remark': sameClub,
  'run.propose': (who, thing) => sameClub(who, thing) && isMentor(who) && !owns(who, thing),
  'run.judge': (who, thing) => sameClub(who, thing) && isMentor(who) && !owns(who, thing),
  'recipe.write': owns,
  'instrument.write': owns,
  'calibration.write': owns,
} satisfies Record<string, (who: Who, thing: OwnedThing) => boolean>

export type ClubAction = keyof typeof clubRules
export type ThingAction = keyof typeof thingRules

export const mayInClub = (who: Who, action: ClubAction): boolean => (clubRules[action] as (who: Who) => boolean)(who)
export const mayWith = (who: Who, action: ThingAction, thing: OwnedThing): boolean => thingRules[action](who, thing)
