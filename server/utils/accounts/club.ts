/** The club: its members, invitations, mails and audit trail. */
import type { z } from 'zod'
import type { AuditItem, Club, Invitation, MailItem, Member, Page, clubBody, invitationBody, memberBody } from '../../../shared/api/account'
import { audit } from '../audit'
import type { Db } from '../db'
import { useDb } from '../db'
import { notFound, problem, texts } from '../errors'
import { deliverMails, publicUrl, queueMail } from '../mail'
import type { Actor } from '../session'
import { hashToken, newId, newToken } from '../tokens'

const DAY = 86_400_000
const INVITATION_MS = 14 * DAY
export const PAGE_SIZE = 50

/** Bytes and runs by member; filled by the archive's tables. */
async function storedBy(clubId: string): Promise<Map<string, { runs: number, bytes: number }>> {
  const db = useDb()
  if (!await db.schema.hasTable('runs')) return new Map()
  const rows = await db('runs as r').leftJoin('run_files as f', 'f.run_id', 'r.id').where({ 'r.club_id': clubId, 'r.state': 'filed' }).groupBy('r.owner_id')
    .select('r.owner_id').countDistinct({ runs: 'r.id' }).sum({ bytes: 'f.size_bytes' }) as unknown as { owner_id: string, runs: number, bytes: number | null }[]
  return new Map(rows.map(row => [row.owner_id, { runs: Number(row.runs), bytes: Number(row.bytes ?? 0) }]))
}

export async function readClub(actor: Actor): Promise<Club> {
  const db = useDb()
  const club = await db('clubs').where({ id: actor.clubId }).first()
  const rows = await db('memberships as m').join('users as u', 'u.id', 'm.user_id').where('m.club_id', actor.clubId).orderBy('u.name').select('u.*', 'm.role', 'm.active', 'm.joined_at')
  const stored = await storedBy(actor.clubId)
  const members = rows.map((row): Member => ({
    id: row.id, name: row.name, email: actor.role === 'organiser' ? row.email : '', role: row.role, active: Boolean(row.active),
    joinedAt: row.joined_at.toISOString(), lastSeenAt: actor.role === 'organiser' ? row.last_seen_at?.toISOString() ?? null : null,
    runs: stored.get(row.id)?.runs ?? 0, storedBytes: stored.get(row.id)?.bytes ?? 0,
  }))
  return { id: club.id, name: club.name, quotaBytes: Number(club.quota_bytes), storedBytes: members.reduce((sum, member) => sum + member.storedBytes, 0), members }
}

export async function changeClub(actor: Actor, { name, quotaBytes }: z.output<typeof clubBody>): Promise<Club> {
  const changes = { ...(name === undefined ? {} : { name }), ...(quotaBytes === undefined ? {} : { quota_bytes: quotaBytes }) }
  if (Object.keys(changes).length) {
    await useDb().transaction(async (trx) => {
      await trx('clubs').where({ id: actor.clubId }).update(changes)
      await audit(trx, { clubId: actor.clubId, userId: actor.id, actor: actor.name, action: 'changed the club', kind: 'club', id: actor.clubId, detail: Object.keys(changes).join(', ') })
    })
  }
  return readClub(actor)
}

function invitationOf(row: Record<string, Date | string | null>): Invitation {
  return {
    id: row.id as string, email: row.email as string, role: row.role as Invitation['role'],
    createdAt: (row.created_at as Date).toISOString(), expiresAt: (row.expires_at as Date).toISOString(), usedAt: (row.used_at as Date | null)?.toISOString() ?? null,
  }
}

export async function listInvitations(actor: Actor): Promise<Invitation[]> {
  return (await useDb()('invitations').where({ club_id: actor.clubId }).orderBy('created_at', 'desc').limit(500)).map(invitationOf)
}

/** Makes an invitation and mails it. The answer carries the link once, because only its hash is stored. */
export async function invite(actor: Actor, { email, role }: z.output<typeof invitationBody>): Promise<Invitation & { url: string }> {
  const db = useDb()
  if (await db('users').where({ email }).first()) throw problem(409, 'email-taken', texts.emailTaken, { field: 'email' })
  const made = await createInvitation(db, { clubId: actor.clubId, clubName: actor.clubName, email, role, by: { id: actor.id, name: actor.name } })
  void deliverMails()
  return made
}

export async function createInvitation(db: Db, { clubId, clubName, email, role, by }: { clubId: string, clubName: string, email: string, role: Invitation['role'], by: { id: string | null, name: string } }): Promise<Invitation & { url: string }> {
  const token = newToken()
  const now = new Date()
  const row = { id: newId(), club_id: clubId, email, role, token_hash: hashToken(token), invited_by: by.id, created_at: now, expires_at: new Date(now.getTime() + INVITATION_MS), used_at: null }
  const url = `${publicUrl()}/register?token=${token}`
  await db.transaction(async (trx) => {
    await trx('invitations').insert(row)
    await audit(trx, { clubId, userId: by.id, actor: by.name, action: 'invited', kind: 'invitation', id: row.id, detail: `${email} as ${role}` })
    await queueMail(trx, {
      clubId, to: email, subject: `${by.name} invites you to ${clubName} on Lull`,
      text: `Hello,\n\n${by.name} invites you to join ${clubName} on Lull as ${role}. Choose your name and password here within two weeks:\n\n${url}\n`,
    })
  })
  return { ...invitationOf(row), url }
}

export async function withdrawInvitation(actor: Actor, id: string): Promise<void> {
  await useDb().transaction(async (trx) => {
    const gone = await trx('invitations').where({ id, club_id: actor.clubId }).whereNull('used_at').delete()
    if (!gone) throw notFound()
    await audit(trx, { clubId: actor.clubId, userId: actor.id, actor: actor.name, action: 'withdrew an invitation', kind: 'invitation', id })
  })
}

/** Changes a member's role or sets them inactive. The club always keeps an active organiser. */
export async function changeMember(actor: Actor, id: string, { role, active }: z.output<typeof memberBody>): Promise<Member> {
  await useDb().transaction(async (trx) => {
    const organisers = await trx('memberships').where({ club_id: actor.clubId, role: 'organiser', active: true }).forUpdate().select('user_id')
    const row = await trx('memberships').where({ club_id: actor.clubId, user_id: id }).forUpdate().first()
    if (!row) throw notFound()
    const next = { role: role ?? row.role, active: active ?? Boolean(row.active) }
    const others = organisers.filter(other => other.user_id !== id).length
    if (others === 0 && !(next.role === 'organiser' && next.active)) throw problem(409, 'last-organiser', texts.lastOrganiser)
    await trx('memberships').where({ club_id: actor.clubId, user_id: id }).update(next)
    if (!next.active) await trx('sessions').where({ user_id: id }).delete()
    await audit(trx, { clubId: actor.clubId, userId: actor.id, actor: actor.name, action: 'changed a member', kind: 'user', id, detail: `${next.role}, ${next.active ? 'active' : 'inactive'}` })
  })
  return (await readClub(actor)).members.find(member => member.id === id)!
}

export async function listMails(actor: Actor, page: number): Promise<Page<MailItem>> {
  const db = useDb()
  const [{ total }] = await db('mails').where({ club_id: actor.clubId }).count({ total: '*' }) as [{ total: number }]
  const rows = await db('mails').where({ club_id: actor.clubId }).orderBy([{ column: 'created_at', order: 'desc' }, { column: 'id' }]).limit(PAGE_SIZE).offset((page - 1) * PAGE_SIZE)
  return { items: rows.map(mailOf), total: Number(total), page, pageSize: PAGE_SIZE }
}

function mailOf(row: Record<string, unknown>): MailItem {
  return { id: row.id as string, to: row.recipient as string, subject: row.subject as string, sentAt: ((row.sent_at ?? row.created_at) as Date).toISOString(), state: row.state as MailItem['state'], error: row.error as string | null }
}

export async function readMail(actor: Actor, id: string): Promise<MailItem> {
  const row = await useDb()('mails').where({ id, club_id: actor.clubId }).first()
  if (!row) throw notFound()
  return { ...mailOf(row), text: row.body }
}

export async function listAudit(actor: Actor, page: number): Promise<Page<AuditItem>> {
  const db = useDb()
  const [{ total }] = await db('audit_events').where({ club_id: actor.clubId }).count({ total: '*' }) as [{ total: number }]
  const rows = await db('audit_events').where({ club_id: actor.clubId }).orderBy([{ column: 'at', order: 'desc' }, { column: 'id' }]).limit(PAGE_SIZE).offset((page - 1) * PAGE_SIZE)
  const items = rows.map((row): AuditItem => ({ id: row.id, at: row.at.toISOString(), actor: row.actor, action: row.action, subject: row.subject_kind, detail: row.detail }))
  return { items, total: Number(total), page, pageSize: PAGE_SIZE }
}
