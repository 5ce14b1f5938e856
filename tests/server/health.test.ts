/** Health, what another site may send, and what answers say of the inside. */
import { readFile, readlink } from 'node:fs/promises'
import { readdirSync, readFileSync } from 'node:fs'
import { afterAll, beforeAll, describe, expect, inject, it } from 'vitest'
import { makeInvitation } from './access/accounts'
import { Client } from './client'
import { closeTestDb, makeWorld, useTestDb, type World } from './world'

let world: World
beforeAll(async () => {
  world = await makeWorld()
})
afterAll(closeTestDb)

/** The process of this test's own database, found by its data folder. */
function databasePid(): number {
  const mark = `--datadir=${inject('lull').folder}/mysql`
  const name = readdirSync('/proc').find((entry) => {
    if (!/^\d+$/.test(entry)) return false
    try {
      return readFileSync(`/proc/${entry}/cmdline`, 'utf8').split('\0').includes(mark)
    }
    catch {
      return false
    }
  })
  return Number(name)
}

describe('health', () => {
  it('is 200 while database and store answer, 503 while the database does not, and 200 again after', async () => {
    const pid = databasePid()
    expect(await readlink(`/proc/${pid}/exe`)).toMatch(/mariadbd|mysqld/)
    expect((await new Client().send('GET', '/api/health')).body).toMatchObject({ ok: true })
    process.kill(pid, 'SIGSTOP')
    try {
      const answer = await new Client().send('GET', '/api/health')
      expect([answer.status, answer.body]).toMatchObject([503, { ok: false, database: 'down' }])
    }
    finally {
      process.kill(pid, 'SIGCONT')
    }
    await expect.poll(async () => (await new Client().send('GET', '/api/health')).status, { timeout: 20_000 }).toBe(200)
  })
})

describe('a request from another site', () => {
  const foreign: Record<string, string>[] = [{ 'sec-fetch-site': 'cross-site' }, { 'sec-fetch-site': 'same-site' }, { origin: 'https://elsewhere.example' }, { origin: 'null' }]
  const writes = [['PATCH', '/api/me'], ['POST', '/api/auth/sign-in'], ['POST', '/api/club/invitations'], ['DELETE', '/api/club/invitations/abcdefghijklmnopqrstuv'], ['POST', '/files'], ['PATCH', '/files/abcdefghijklmnopqrstuv'], ['DELETE', '/files/abcdefghijklmnopqrstuv']] as const
  it.each(writes.flatMap(([method, route]) => foreign.map(headers => ({ method, route, headers }))))('is refused: $method $route $headers', async ({ method, route, headers }) => {
    const answer = await world.people.organiser.client.copy().send(method, route, { body: { name: 'Hijacked' }, headers })
    expect(answer.status).toBe(403)
  })

  it('may read, and our own pages may write', async () => {
    const { client } = world.people.mentor
    expect((await client.send('GET', '/api/me', { headers: { 'sec-fetch-site': 'cross-site' } })).status).toBe(200)
    const own = { origin: inject('lull').url, 'sec-fetch-site': 'same-origin' }
    expect((await client.send('PATCH', '/api/me', { body: { name: 'Thea' }, headers: own })).status).toBe(200)
  })
})

describe('answers', () => {
  it('say nothing of the inside when something breaks', async () => {
    const db = useTestDb()
    await db.schema.renameTable('mails', 'mails_away')
    try {
      const answer = await world.people.organiser.client.send<{ message: string }>('GET', '/api/club/mails')
      expect(answer.status).toBe(500)
      expect(answer.text).not.toMatch(/mails_away|select |from `|ER_|node_modules|\.mjs|\.ts|at /)
    }
    finally {
      await db.schema.renameTable('mails_away', 'mails')
    }
  })

  it('name the field that is wrong, and refuse a body that is no JSON', async () => {
    const { client } = world.people.member
    expect((await client.send('PATCH', '/api/me', { body: { name: '' } })).body).toMatchObject({ data: { code: 'invalid', field: 'name' } })
    expect((await client.send('PATCH', '/api/me', { raw: Buffer.from('{"name": '), headers: { 'content-type': 'application/json' } })).status).toBe(400)
  })

  it('of a page carry a policy whose nonce is on every script, a new one each time', async () => {
    const policies = []
    for (let i = 0; i < 2; i++) {
      const page = await new Client().send('GET', '/sign-in', { headers: { accept: 'text/html' } })
      const policy = String(page.headers['content-security-policy'])
      const nonce = /'nonce-([^']+)'/.exec(policy)![1]!
      const scripts = page.text.match(/<script[\s>][^>]*/g) ?? []
      expect(scripts.length).toBeGreaterThan(0)
      expect(scripts.filter(tag => !tag.includes(`nonce="${nonce}"`))).toEqual([])
      for (const part of ['object-src \'none\'', 'base-uri \'none\'', 'frame-ancestors \'none\'']) expect(policy).toContain(part)
      expect(policy).not.toMatch(/script-src[^;]*'unsafe-(?:inline|eval)'/)
      expect(page.headers).toMatchObject({ 'cross-origin-opener-policy': 'same-origin', 'cross-origin-embedder-policy': 'require-corp', 'x-content-type-options': 'nosniff' })
      policies.push(policy)
    }
    expect(policies[0]).not.toBe(policies[1])
  })

  it('of a script, which may be a worker, are isolated and under a policy as well', async () => {
    const page = await new Client().send('GET', '/sign-in', { headers: { accept: 'text/html' } })
    const script = /src="(\/_nuxt\/[^"]+\.js)"/.exec(page.text)![1]!
    const answer = await new Client().send('GET', script)
    expect(answer.headers).toMatchObject({ 'cross-origin-embedder-policy': 'require-corp', 'cross-origin-opener-policy': 'same-origin' })
    expect(String(answer.headers['content-security-policy'])).toContain('\'wasm-unsafe-eval\'')
  })

  it('have an id, under which the log has a line without tokens', async () => {
    const { token } = await makeInvitation(world)
    const answer = await new Client().send('GET', `/api/auth/invitation?token=${token}`)
    const id = String(answer.headers['x-request-id'])
    const log = () => readFile(inject('lull').log, 'utf8')
    await expect.poll(log).toContain(id)
    expect(await log()).not.toContain(token)
  })
})
