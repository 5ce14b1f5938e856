/** Share links: a random token that opens one run, stored only as a hash, with an end and a way to withdraw it. */
import type { H3Event } from 'h3'
import { getRouterParam, setResponseHeader } from 'h3'
import type { z } from 'zod'
import type { linkBody, LinkScope, ShareLink } from '../../../shared/api/archive'
import { idSchema } from '../../../shared/api/account'
import { runFor } from '../archive/change'
import { audit } from '../audit'
import { useDb } from '../db'
import { notFound, problem, texts } from '../errors'
import { publicUrl } from '../mail'
import type { Actor } from '../session'
import { hashToken, newId, newToken } from '../tokens'
import type { Author } from './discussion'

const DAY = 86_400_000

interface LinkRow { id: string, run_id: string, scope: LinkScope, created_at: Date, expires_at: Date, withdrawn_at: Date | null, last_used_at: Date | null }
const linkOf = (row: LinkRow): ShareLink => ({
  id: row.id, scope: row.scope, createdAt: row.created_at.toISOString(), expiresAt: row.expires_at.toISOString(),
  withdrawnAt: row.withdrawn_at?.toISOString() ?? null, lastUsedAt: row.last_used_at?.toISOString() ?? null,
})

export async function listLinks(actor: Actor, runId: string): Promise<ShareLink[]> {
  await runFor(actor, runId, 'run.share')
  return (await useDb()('share_links').where({ run_id: runId }).orderBy('created_at', 'desc') as LinkRow[]).map(linkOf)
}

export async function makeLink(actor: Actor, runId: string, { scope, days }: z.output<typeof linkBody>): Promise<ShareLink> {
  const run = await runFor(actor, runId, 'run.share')
  if (run.state !== 'filed') throw notFound()
  const token = newToken()
  const now = new Date()
  const row = { id: newId(), run_id: runId, token_hash: hashToken(token), scope, created_by: actor.id, created_at: now, expires_at: new Date(now.getTime() + days * DAY), withdrawn_at: null, last_used_at: null }
  await useDb().transaction(async (trx) => {
    await trx('share_links').insert(row)
    await audit(trx, { clubId: actor.clubId, userId: actor.id, actor: actor.name, action: 'made a share link', kind: 'run', id: runId, detail: `${scope === 'look' ? 'look' : 'look and remark'}, ${days} days` })
  })
  return { ...linkOf(row), url: `${publicUrl()}/s/${token}` }
}

export async function withdrawLink(actor: Actor, runId: string, linkId: string): Promise<void> {
  await runFor(actor, runId, 'run.share')
  await useDb().transaction(async (trx) => {
    const row = await trx('share_links').where({ id: linkId, run_id: runId }).first()
    if (!row) throw notFound()
    if (row.withdrawn_at) return
    await trx('share_links').where({ id: linkId }).update({ withdrawn_at: new Date() })
    await audit(trx, { clubId: actor.clubId, userId: actor.id, actor: actor.name, action: 'withdrew a share link', kind: 'run', id: runId })
  })
}

export interface OpenLink { token: string, runId: string, clubId: string, scope: LinkScope, expiresAt: string }

/** The link of this request's token; unknown, expired and withdrawn ones and those of deleted runs answer the same 404. */
export async function requireLink(event: H3Event): Promise<OpenLink> {
  setResponseHeader(event, 'Cache-Control', 'no-store')
  setResponseHeader(event, 'Referrer-Policy', 'no-referrer')
  setResponseHeader(event, 'X-Robots-Tag', 'noindex, nofollow')
  const token = idSchema.safeParse(getRouterParam(event, 'token'))
  if (!token.success) throw notFound()
  const now = new Date()
  const row = await useDb()('share_links as l').join('runs as r', 'r.id', 'l.run_id').where({ 'l.token_hash': hashToken(token.data), 'r.state': 'filed' })
    .whereNull('l.withdrawn_at').where('l.expires_at', '>', now).first('l.*', 'r.club_id')
  if (!row) throw notFound()
  if (!row.last_used_at || now.getTime() - row.last_used_at.getTime() > 60_000) await useDb()('share_links').where({ id: row.id }).update({ last_used_at: now })
  return { token: token.data, runId: row.run_id, clubId: row.club_id, scope: row.scope, expiresAt: row.expires_at.toISOString() }
}

/** The guest as an author, if the link lets them remark. */
export function guestAuthor(link: OpenLink, guestName: string | undefined): Author {
  if (link.scope !== 'remark') throw problem(403, 'not-allowed', texts.notAllowed)
  if (!guestName) throw problem(400, 'invalid', 'Say who you are, so that the owner knows whose remark this is.', { field: 'guestName' })
  return { userId: null, guestName, shownName: `${guestName} (guest)`, clubId: link.clubId }
}
