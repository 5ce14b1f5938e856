/** Signing in and out: what a stranger, a thief of a cookie and a clock can do. */
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { Client } from './client'
import { closeTestDb, makeClub, makePerson, PASSWORD, useTestDb, type TestPerson } from './world'

const DAY = 86_400_000
const signIn = (email: string, password: string, more = {}) => new Client().send<{ message: string, data?: { code: string, retryAfterSeconds?: number } }>('POST', '/api/auth/sign-in', { body: { email, password }, ...more })

let clubId: string
const somebody = (name: string): Promise<TestPerson> => makePerson(clubId, 'member', name)
beforeAll(async () => {
  clubId = await makeClub()
})
afterAll(closeTestDb)

describe('sign-in', () => {
  it('answers who one is, and takes the address in any case', async () => {
    const person = await somebody('Agda')
    const answer = await signIn(person.email.toUpperCase(), PASSWORD)
    expect(answer.status).toBe(200)
    expect(answer.body).toMatchObject({ id: person.id, email: person.email, role: 'member', clubId })
  })

  it('tells an unknown address and a wrong password apart by nothing', async () => {
    const person = await somebody('Bela')
    const wrong = await signIn(person.email, 'not the password')
    const unknown = await signIn('nobody@test.example', 'not the password')
    expect([wrong.status, unknown.status]).toEqual([401, 401])
    expect(wrong.body).toEqual(unknown.body)
  })

  it('sets a cookie that scripts and other sites do not get, and that holds no name', async () => {
    const person = await somebody('Cato')
    const answer = await signIn(person.email, PASSWORD)
    const [cookie] = answer.headers['set-cookie'] as string[]
    expect(cookie).toMatch(/; HttpOnly/i)
    expect(cookie).toMatch(/; SameSite=Lax/i)
    expect(cookie).toMatch(/; Path=\//i)
    expect(cookie!.length).toBeLessThan(4096)
    expect(answer.headers['cache-control']).toBe('no-store')
  })

  it('refuses a member who was set inactive, in the same words', async () => {
    const person = await somebody('Dora')
    await useTestDb()('memberships').where({ user_id: person.id }).update({ active: false })
    expect((await signIn(person.email, PASSWORD)).status).toBe(401)
    expect((await person.client.send('GET', '/api/me')).status).toBe(401)
  })

  it('is limited by account and address: 429 with Retry-After, whatever X-Forwarded-For says', async () => {
    const person = await somebody('Emil')
    const tried = []
    for (let i = 0; i < 12; i++) tried.push(await signIn(person.email, 'not the password', { headers: { 'x-forwarded-for': `203.0.113.${i}` }, localAddress: '127.0.0.3' }))
    expect(tried[0]!.status).toBe(401)
    const last = tried.at(-1)!
    expect(last.status).toBe(429)
    expect(Number(last.headers['retry-after'])).toBeGreaterThan(0)
    expect(last.body.data).toMatchObject({ code: 'too-many', retryAfterSeconds: Number(last.headers['retry-after']) })
    const right = await signIn(person.email, PASSWORD, { localAddress: '127.0.0.3' })
    expect(right.status).toBe(429)
  })

  it('is not locked for the owner by a stranger elsewhere', async () => {
    const person = await somebody('Fenn')
    for (let i = 0; i < 12; i++) await signIn(person.email, 'not the password', { localAddress: '127.0.0.4' })
    expect((await signIn(person.email, PASSWORD, { localAddress: '127.0.0.5' })).status).toBe(200)
  })

  it('counts attempts that arrive together', async () => {
    const person = await somebody('Gerda')
    const all = await Promise.all(Array.from({ length: 20 }, () => signIn(person.email, 'not the password', { localAddress: '127.0.0.6' })))
    expect(all.filter(({ status }) => status === 401).length).toBeLessThanOrEqual(8)
    expect(all.every(({ status }) => status === 401 || status === 429)).toBe(true)
  })
})

describe('a session', () => {
  it('ends with sign-out, for a copied cookie as well', async () => {
    const { client } = await somebody('Hulda')
    const thief = client.copy()
    expect((await thief.send('GET', '/api/me')).status).toBe(200)
    expect((await client.send('POST', '/api/auth/sign-out')).status).toBe(204)
    expect((await thief.send('GET', '/api/me')).status).toBe(401)
  })

  it('is replaced by a new sign-in in the same browser', async () => {
    const person = await somebody('Ivo')
    const before = person.client.copy()
    await person.client.send('POST', '/api/auth/sign-in', { body: { email: person.email, password: PASSWORD } })
    expect((await person.client.send('GET', '/api/me')).status).toBe(200)
    expect((await before.send('GET', '/api/me')).status).toBe(401)
  })

  it.each([['a week without use', { seen_at: 7 * DAY + 1000 }], ['two weeks in all', { created_at: 14 * DAY + 1000 }]])('ends after %s', async (_, ages) => {
    const person = await somebody('Jula')
    const [[column, age]] = Object.entries(ages) as [[string, number]]
    await useTestDb()('sessions').where({ user_id: person.id }).update({ [column]: new Date(Date.now() - age + 60_000) })
    expect((await person.client.send('GET', '/api/me')).status).toBe(200)
    await useTestDb()('sessions').where({ user_id: person.id }).update({ [column]: new Date(Date.now() - age) })
    expect((await person.client.send('GET', '/api/me')).status).toBe(401)
  })

  it('is not taken from a header, and a made-up cookie is nobody', async () => {
    const { client } = await somebody('Kolbe')
    const value = client.cookie.split('=').slice(1).join('=')
    const other = new Client()
    expect((await other.send('GET', '/api/me', { headers: { 'x-lull-session-session': decodeURIComponent(value) } })).status).toBe(401)
    expect((await other.send('GET', '/api/me', { headers: { cookie: 'lull-session=Fe26.2**made**up' } })).status).toBe(401)
  })
})
