/** Signing in and out, registering, passwords. */
import { rm } from 'node:fs/promises'
import type { H3Event } from 'h3'
import type { z } from 'zod'
import type { InvitationPreview, Me, Role, changePasswordBody, forgotBody, profileBody, registerBody, resetBody, signInBody } from '../../../shared/api/account'
import { emailSchema } from '../../../shared/api/account'
import { audit } from '../audit'
import type { Db } from '../db'
import { useDb } from '../db'
import { problem, texts } from '../errors'
import { firstInvitationFile } from '../folders'
import { clearAttempts, clientAddress, countAttempt, giveBackAttempt } from '../limits'
import { deliverMails, publicUrl, queueMail } from '../mail'
import type { Actor } from '../session'
import { beginSession, currentActor, meOf } from '../session'
import { hashToken, newId, newToken } from '../tokens'

const HOUR = 3_600_000
const RESET_MS = 2 * HOUR

let nobody: Promise<string> | null = null
/** A hash that no password fits, so that an unknown address costs the same time as a wrong password. */
const hashOfNobody = () => (nobody ??= hashPassword(newToken()))

async function answerMe(event: H3Event, userId: string): Promise<Me> {
  await beginSession(event, userId)
  const row = await useDb()('users as u').join('memberships as m', 'm.user_id', 'u.id').join('clubs as c', 'c.id', 'm.club_id').where('u.id', userId)
    .first('u.id', 'u.name', 'u.email', 'm.role', 'c.id as club_id', 'c.name as club_name')
  return { id: row.id, name: row.name, email: row.email, role: row.role as Role, clubId: row.club_id, clubName: row.club_name }
}

export async function signIn(event: H3Event, { email: given, password }: z.output<typeof signInBody>): Promise<Me> {
  const email = given.trim().toLowerCase()
  const address = clientAddress(event)
  const key = `${email} ${address}`
  await countAttempt(event, 'sign-in-address', address)
  await countAttempt(event, 'sign-in', key)
  const user = await useDb()('users as u').join('memberships as m', 'm.user_id', 'u.id').where({ 'u.email': email }).first('u.id', 'u.password_hash', 'm.active')
  const right = await verifyPassword(user?.password_hash ?? await hashOfNobody(), password)
  if (!user || !right || !user.active) throw problem(401, 'wrong-sign-in', texts.wrongSignIn)
  await clearAttempts('sign-in', key)
  await giveBackAttempt('sign-in-address', address)
  return answerMe(event, user.id)
}

async function openInvitation(token: string) {
  const row = await useDb()('invitations as i').join('clubs as c', 'c.id', 'i.club_id').where({ 'i.token_hash': hashToken(token) }).whereNull('i.used_at').where('i.expires_at', '>', new Date())
    .first('i.*', 'c.name as club_name')
  if (!row) throw problem(404, 'bad-invitation', texts.badInvitation)
  return row
}

export async function previewInvitation(event: H3Event, token: string): Promise<InvitationPreview> {
  await countAttempt(event, 'token', clientAddress(event))
  const row = await openInvitation(token)
  await giveBackAttempt('token', clientAddress(event))
  return { clubName: row.club_name, email: row.email, role: row.role, expiresAt: row.expires_at.toISOString() }
}

export async function register(event: H3Event, { token, name, password }: z.output<typeof registerBody>): Promise<Me> {
  await countAttempt(event, 'token', clientAddress(event))
  const invitation = await openInvitation(token)
  const passwordHash = await hashPassword(password)
  const id = newId()
  await useDb().transaction(async (trx) => {
    const used = await trx('invitations').where({ id: invitation.id }).whereNull('used_at').update({ used_at: new Date() })
    if (used !== 1) throw problem(404, 'bad-invitation', texts.badInvitation)
    if (await trx('users').where({ email: invitation.email }).first()) throw problem(409, 'email-taken', texts.emailTaken)
    await addMember(trx, { id, clubId: invitation.club_id, email: invitation.email, name, role: invitation.role, passwordHash })
    await audit(trx, { clubId: invitation.club_id, userId: id, actor: name, action: 'joined', kind: 'user', id, detail: `as ${invitation.role}` })
  })
  await giveBackAttempt('token', clientAddress(event))
  // Only the very first invitation has no sender; its link was kept for the operator.
  if (invitation.invited_by === null) await rm(firstInvitationFile(), { force: true })
  return answerMe(event, id)
}

/** Writes a person and their membership. */
export async function addMember(db: Db, person: { id: string, clubId: string, email: string, name: string, role: Role, passwordHash: string }): Promise<void> {
  const now = new Date()
  await db('users').insert({ id: person.id, email: person.email, name: person.name, password_hash: person.passwordHash, created_at: now })
  await db('memberships').insert({ club_id: person.clubId, user_id: person.id, role: person.role, active: true, joined_at: now })
}

/**
 * Mails a way to a new password, if there is such an account. The work begins after the answer, so that the time of
 * the answer does not tell whether there is.
 */
export async function forgotPassword(event: H3Event, { email: given }: z.output<typeof forgotBody>): Promise<void> {
  await countAttempt(event, 'forgot', `${given.trim().toLowerCase()} ${clientAddress(event)}`)
  const parsed = emailSchema.safeParse(given.trim())
  if (parsed.success) event.waitUntil(mailReset(parsed.data).catch(error => console.error('A reset could not be mailed:', (error as Error).message)))
}

async function mailReset(email: string): Promise<void> {
  const db = useDb()
  const user = await db('users as u').join('memberships as m', 'm.user_id', 'u.id').where({ 'u.email': email, 'm.active': true }).first('u.id', 'u.name', 'u.email', 'm.club_id')
  if (!user) return
  const token = newToken()
  await db.transaction(async (trx) => {
    await trx('password_resets').insert({ id: newId(), user_id: user.id, token_hash: hashToken(token), created_at: new Date(), expires_at: new Date(Date.now() + RESET_MS) })
    await queueMail(trx, {
      clubId: user.club_id, to: user.email, subject: 'A new password for Lull',
      text: `Hello ${user.name},\n\nsomebody, probably you, asked for a new password. Choose it here within two hours:\n\n${publicUrl()}/reset?token=${token}\n\nIf it was not you, do nothing: your password stays as it is.\n`,
    })
  })
  await deliverMails()
}

export async function resetPassword(event: H3Event, { token, password }: z.output<typeof resetBody>): Promise<void> {
  await countAttempt(event, 'token', clientAddress(event))
  const passwordHash = await hashPassword(password)
  await useDb().transaction(async (trx) => {
    const row = await trx('password_resets').where({ token_hash: hashToken(token) }).whereNull('used_at').where('expires_at', '>', new Date()).forUpdate().first()
    if (!row) throw problem(404, 'bad-reset', texts.badReset)
    await trx('password_resets').where({ user_id: row.user_id }).whereNull('used_at').update({ used_at: new Date() })
    await setPassword(trx, row.user_id, passwordHash)
  })
}

async function setPassword(db: Db, userId: string, passwordHash: string) {
  await db('users').where({ id: userId }).update({ password_hash: passwordHash })
  await db('sessions').where({ user_id: userId }).delete()
  const row = await db('users as u').join('memberships as m', 'm.user_id', 'u.id').where('u.id', userId).first('u.name', 'm.club_id')
  await audit(db, { clubId: row.club_id, userId, actor: row.name, action: 'changed the password', kind: 'user', id: userId })
}

export async function changePassword(event: H3Event, actor: Actor, { current, next }: z.output<typeof changePasswordBody>): Promise<void> {
  await countAttempt(event, 'sign-in', `${actor.email} ${clientAddress(event)}`)
  const row = await useDb()('users').where({ id: actor.id }).first('password_hash')
  if (!await verifyPassword(row.password_hash, current)) throw problem(400, 'wrong-password', texts.wrongPassword, { field: 'current' })
  const passwordHash = await hashPassword(next)
  await useDb().transaction(trx => setPassword(trx, actor.id, passwordHash))
  await beginSession(event, actor.id)
}

export async function changeProfile(event: H3Event, actor: Actor, { name }: z.output<typeof profileBody>): Promise<Me> {
  await useDb()('users').where({ id: actor.id }).update({ name })
  event.context.actor = undefined
  return meOf((await currentActor(event))!)
}
