/** Access to accounts and the club. */
import { createHash, randomBytes } from 'node:crypto'
import type { World } from '../world'
import { newId, PASSWORD } from '../world'
import { anyone, organisers, ownOrganiser, signedIn, type AccessRow } from './row'

const hash = (token: string) => createHash('sha256').update(token).digest('hex')
const soon = () => new Date(Date.now() + 3_600_000)

export async function makeInvitation({ db, clubId }: World, more: Record<string, unknown> = {}): Promise<{ id: string, token: string, email: string }> {
  const [id, token, email] = [newId(), randomBytes(32).toString('base64url'), `invited-${randomBytes(6).toString('hex')}@test.example`]
  await db('invitations').insert({ id, club_id: clubId, email, role: 'member', token_hash: hash(token), created_at: new Date(), expires_at: soon(), ...more })
  return { id, token, email }
}

export async function makeReset({ db, people }: World, more: Record<string, unknown> = {}): Promise<string> {
  const token = randomBytes(32).toString('base64url')
  await db('password_resets').insert({ id: newId(), user_id: people.foreignMember.id, token_hash: hash(token), created_at: new Date(), expires_at: soon(), ...more })
  return token
}

async function makeMail({ db, clubId }: World): Promise<string> {
  const id = newId()
  await db('mails').insert({ id, club_id: clubId, recipient: 'somebody@test.example', subject: 'Test', body: 'Test', state: 'sent', created_at: new Date(), sent_at: new Date() })
  return id
}

async function makeMember({ db, clubId }: World): Promise<string> {
  const id = newId()
  await db('users').insert({ id, email: `${id.toLowerCase()}@test.example`, name: 'Somebody', password_hash: 'none', created_at: new Date() })
  await db('memberships').insert({ club_id: clubId, user_id: id, role: 'member', active: true, joined_at: new Date() })
  return id
}

export const accountRows: AccessRow[] = [
  { method: 'GET', route: '/api/health', ask: () => ({ path: '/api/health' }), expect: anyone(200) },
  { method: 'GET', route: '/api/**', ask: () => ({ path: '/api/nothing/of/this/name' }), expect: anyone(404) },
  { method: 'POST', route: '/api/**', ask: () => ({ path: '/api/nothing', body: {} }), expect: anyone(404) },
  { method: 'GET', route: '/api/_auth/session', ask: () => ({ path: '/api/_auth/session' }), expect: anyone(404) },
  { method: 'DELETE', route: '/api/_auth/session', ask: () => ({ path: '/api/_auth/session' }), expect: anyone(404) },

  { method: 'POST', route: '/api/auth/sign-in', ask: ({ people }) => ({ path: '/api/auth/sign-in', body: { email: people.member.email, password: PASSWORD } }), expect: anyone(200), ownSession: true },
  { method: 'POST', route: '/api/auth/sign-out', ask: () => ({ path: '/api/auth/sign-out' }), expect: anyone(204), ownSession: true },
  { method: 'GET', route: '/api/auth/invitation', ask: async world => ({ path: `/api/auth/invitation?token=${(await makeInvitation(world)).token}` }), expect: anyone(200) },
  { method: 'POST', route: '/api/auth/register', ask: async world => ({ path: '/api/auth/register', body: { token: (await makeInvitation(world)).token, name: 'New One', password: PASSWORD } }), expect: anyone(200), ownSession: true },
  { method: 'POST', route: '/api/auth/forgot', ask: () => ({ path: '/api/auth/forgot', body: { email: `nobody-${newId()}@test.example` } }), expect: anyone(202) },
  { method: 'POST', route: '/api/auth/reset', ask: () => ({ path: '/api/auth/reset', body: { token: newId() + newId(), password: PASSWORD } }), expect: anyone(404) },

  { method: 'GET', route: '/api/me', ask: () => ({ path: '/api/me' }), expect: signedIn(200) },
  { method: 'PATCH', route: '/api/me', ask: () => ({ path: '/api/me', body: { name: 'Renamed' } }), expect: signedIn(200) },
  { method: 'POST', route: '/api/me/password', ask: () => ({ path: '/api/me/password', body: { current: 'not the password', next: PASSWORD } }), expect: signedIn(400) },

  { method: 'GET', route: '/api/club', ask: () => ({ path: '/api/club' }), expect: signedIn(200) },
  { method: 'PATCH', route: '/api/club', ask: () => ({ path: '/api/club', body: { name: 'Another name' } }), expect: organisers(200) },
  { method: 'GET', route: '/api/club/invitations', ask: () => ({ path: '/api/club/invitations' }), expect: organisers(200) },
  { method: 'POST', route: '/api/club/invitations', ask: () => ({ path: '/api/club/invitations', body: { email: `new-${newId().toLowerCase().replaceAll(/[^a-z0-9]/g, 'x')}@test.example`, role: 'member' } }), expect: organisers(200) },
  { method: 'DELETE', route: '/api/club/invitations/:id', ask: async world => ({ path: `/api/club/invitations/${(await makeInvitation(world)).id}` }), expect: ownOrganiser(204) },
  { method: 'PATCH', route: '/api/club/members/:id', ask: async world => ({ path: `/api/club/members/${await makeMember(world)}`, body: { role: 'mentor' } }), expect: ownOrganiser(200) },
  { method: 'GET', route: '/api/club/mails', ask: () => ({ path: '/api/club/mails' }), expect: organisers(200) },
  { method: 'GET', route: '/api/club/mails/:id', ask: async world => ({ path: `/api/club/mails/${await makeMail(world)}` }), expect: ownOrganiser(200) },
  { method: 'GET', route: '/api/club/audit', ask: () => ({ path: '/api/club/audit' }), expect: organisers(200) },
]
