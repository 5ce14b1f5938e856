/** Passwords, invitations and the club's mail. */
import { readdir, readFile } from 'node:fs/promises'
import path from 'node:path'
import PostalMime from 'postal-mime'
import { afterAll, beforeAll, describe, expect, inject, it } from 'vitest'
import { makeInvitation, makeReset } from './access/accounts'
import { Client } from './client'
import { closeTestDb, makeClub, makePerson, makeWorld, PASSWORD, useTestDb, type World } from './world'

let world: World
beforeAll(async () => {
  world = await makeWorld()
})
afterAll(closeTestDb)

/** The newest mail to this address that the local SMTP server took. */
async function mailTo(address: string): Promise<{ subject: string, text: string } | null> {
  const folder = path.join(inject('lull').folder, 'mail')
  const names = (await readdir(folder).catch(() => [])).sort().reverse()
  for (const name of names) {
    const mail = await PostalMime.parse(await readFile(path.join(folder, name)))
    if (mail.to?.some(to => to.address === address)) return { subject: mail.subject ?? '', text: mail.text ?? '' }
  }
  return null
}

async function waitForMail(address: string) {
  await expect.poll(() => mailTo(address), { timeout: 15_000, interval: 100 }).not.toBeNull()
  return (await mailTo(address))!
}

const tokenIn = (text: string) => /token=([\w-]+)/.exec(text)![1]!

describe('a forgotten password', () => {
  it('is replaced through the mailed link, once; all sessions end', async () => {
    const person = await makePerson(world.clubId, 'member', 'Lotta')
    expect((await new Client().send('POST', '/api/auth/forgot', { body: { email: person.email } })).status).toBe(202)
    const token = tokenIn((await waitForMail(person.email)).text)
    const reset = () => new Client().send('POST', '/api/auth/reset', { body: { token, password: 'another long password' } })
    expect((await reset()).status).toBe(204)
    expect((await reset()).status).toBe(404)
    expect((await person.client.send('GET', '/api/me')).status).toBe(401)
    expect((await new Client().send('POST', '/api/auth/sign-in', { body: { email: person.email, password: 'another long password' } })).status).toBe(200)
    const rows = await useTestDb()('password_resets').where({ user_id: person.id })
    expect(JSON.stringify(rows)).not.toContain(token)
    // A sent mail is kept without its token, so that nobody can enter by reading the club's mail.
    await expect.poll(async () => (await useTestDb()('mails').where({ recipient: person.email }).first()).state).toBe('sent')
    expect((await useTestDb()('mails').where({ recipient: person.email }).first()).body).not.toContain(token)
  })

  it('answers the same for an address without an account', async () => {
    const there = await new Client().send('POST', '/api/auth/forgot', { body: { email: world.people.mentor.email } })
    const nowhere = await new Client().send('POST', '/api/auth/forgot', { body: { email: 'nobody-at-all@test.example' } })
    expect([there.status, there.text]).toEqual([nowhere.status, nowhere.text])
  })

  it('is not replaced through an expired link, and a short password says why', async () => {
    const expired = await makeReset(world, { expires_at: new Date(Date.now() - 1000) })
    expect((await new Client().send('POST', '/api/auth/reset', { body: { token: expired, password: PASSWORD } })).status).toBe(404)
    const answer = await new Client().send<{ message: string, data: { field: string } }>('POST', '/api/auth/reset', { body: { token: await makeReset(world), password: 'short' } })
    expect(answer.status).toBe(400)
    expect(answer.body.data.field).toBe('password')
    expect(answer.body.message).toContain('12 characters')
  })
})

describe('a changed password', () => {
  it('ends the other sessions and keeps this one', async () => {
    const person = await makePerson(world.clubId, 'member', 'Mirko')
    const other = await Client.signedIn(person.email, PASSWORD)
    expect((await person.client.send('POST', '/api/me/password', { body: { current: PASSWORD, next: 'a new long password' } })).status).toBe(204)
    expect((await person.client.send('GET', '/api/me')).status).toBe(200)
    expect((await other.send('GET', '/api/me')).status).toBe(401)
  })
})

describe('an invitation', () => {
  it('is mailed, shown, used once, and brings the invited role', async () => {
    const email = 'newcomer-1@test.example'
    const made = await world.people.organiser.client.send<{ id: string }>('POST', '/api/club/invitations', { body: { email, role: 'mentor' } })
    expect(made.status).toBe(200)
    const token = tokenIn((await waitForMail(email)).text)
    const preview = await new Client().send<{ email: string, role: string }>('GET', `/api/auth/invitation?token=${token}`)
    expect(preview.body).toMatchObject({ email, role: 'mentor' })
    const newcomer = new Client()
    const body = { token, name: 'Newcomer', password: PASSWORD }
    expect((await newcomer.send<{ role: string }>('POST', '/api/auth/register', { body })).body).toMatchObject({ role: 'mentor', clubId: world.clubId })
    expect((await newcomer.send('GET', '/api/me')).status).toBe(200)
    expect((await new Client().send('POST', '/api/auth/register', { body })).status).toBe(404)
  })

  it('admits exactly one of twenty who use it together', async () => {
    const { token, email } = await makeInvitation(world)
    const all = await Promise.all(Array.from({ length: 20 }, (_, i) => new Client().send('POST', '/api/auth/register', { body: { token, name: `Twin ${i}`, password: PASSWORD }, localAddress: '127.0.0.7' })))
    expect(all.filter(({ status }) => status === 200)).toHaveLength(1)
    expect(all.filter(({ status }) => status >= 500)).toEqual([])
    expect(await useTestDb()('users').where({ email })).toHaveLength(1)
  })

  it.each([['expired', { expires_at: new Date(Date.now() - 1000) }], ['used', { used_at: new Date() }]])('that is %s answers like one that never was', async (_, more) => {
    const { token } = await makeInvitation(world, more)
    const [gone, never] = [await new Client().send('GET', `/api/auth/invitation?token=${token}`), await new Client().send('GET', `/api/auth/invitation?token=${'x'.repeat(43)}`)]
    expect([gone.status, gone.body]).toMatchObject([404, { message: (never.body as { message: string }).message }])
  })
})

describe('extra fields', () => {
  it('never change role, club or address', async () => {
    const person = await makePerson(world.clubId, 'member', 'Nadja')
    await person.client.send('PATCH', '/api/me', { body: { name: 'Nadja B', role: 'organiser', clubId: world.foreignClubId, email: 'other@test.example', id: 'other' } })
    const me = await person.client.send('GET', '/api/me')
    expect(me.body).toMatchObject({ id: person.id, name: 'Nadja B', role: 'member', clubId: world.clubId, email: person.email })
    const { token } = await makeInvitation(world)
    const joined = await new Client().send('POST', '/api/auth/register', { body: { token, name: 'Odo', password: PASSWORD, role: 'organiser', clubId: world.foreignClubId } })
    expect(joined.body).toMatchObject({ role: 'member', clubId: world.clubId })
  })
})

describe('the last organiser', () => {
  it('stays, also when two take the role from each other at the same moment', async () => {
    const clubId = await makeClub()
    const [one, two] = [await makePerson(clubId, 'organiser', 'Petra'), await makePerson(clubId, 'organiser', 'Quirin')]
    const answers = await Promise.all([one.client.send('PATCH', `/api/club/members/${two.id}`, { body: { role: 'member' } }), two.client.send('PATCH', `/api/club/members/${one.id}`, { body: { role: 'member' } })])
    expect(answers.filter(({ status }) => status >= 500)).toEqual([])
    expect(await useTestDb()('memberships').where({ club_id: clubId, role: 'organiser', active: true })).toHaveLength(1)
  })
})
