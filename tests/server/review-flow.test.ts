/** Links, reviews and recipes as people go through them. */
import { readFileSync } from 'node:fs'
import { afterAll, beforeAll, describe, expect, inject, it } from 'vitest'
import type { Page } from '../../shared/api/account'
import type { Pin, RecipeDetail, RecipeSummary, Remark, Review, ReviewItem, RunDetail, ShareLink } from '../../shared/api/archive'
import { recipeHash } from '../../shared/recipe/canonical'
import { defaultRecipe } from '../../shared/schemas/recipe'
import { Client } from './client'
import { filedRun, must } from './filing'
import { closeTestDb, makeWorld, useTestDb, type World } from './world'

let world: World
beforeAll(async () => {
  world = await makeWorld()
})
afterAll(closeTestDb)

const post = async <T>(who: Client, path: string, body: unknown = {}, status = 201) => must(await who.send<T>('POST', path, { body }), status).body
const read = async (who: Client, id: string) => must(await who.send<RunDetail>('GET', `/api/runs/${id}`), 200).body
const mailsTo = async (email: string) => (await useTestDb()('mails').where({ recipient: email }).orderBy('created_at')).map(mail => ({ subject: mail.subject as string, text: mail.body as string }))
const otherRecipe = (fraction: number) => ({ ...defaultRecipe, keep: { fraction } })

describe('a review', () => {
  it('goes from asking to the verdict, and each who waits is mailed', async () => {
    const { member, mentor, organiser } = world.people
    const run = await filedRun(member.client, { targetName: 'Review pair' })
    await post<Review>(member.client, `/api/runs/${run.id}/review`, { text: 'Is the gap real?' })
    expect((await member.client.send('POST', `/api/runs/${run.id}/review`, { body: {} })).status).toBe(409)
    expect((await mailsTo(mentor.email)).filter(mail => mail.text.includes(run.id) && mail.text.includes('Is the gap real?'))).toHaveLength(1)
    expect((await mailsTo(organiser.email)).filter(mail => mail.text.includes(run.id))).toEqual([])

    const queue = must(await mentor.client.send<Page<ReviewItem>>('GET', '/api/reviews'), 200).body
    expect(queue.items.map(item => item.run.id)).toContain(run.id)
    const pin = await post<Pin>(mentor.client, `/api/runs/${run.id}/pins`, { x: 12.5, y: 30, text: 'A ring here.' })
    await post<Remark>(member.client, `/api/runs/${run.id}/remarks`, { pinId: pin.id, text: 'It is the first bright ring.' })
    await post(mentor.client, `/api/runs/${run.id}/proposals`, { recipe: otherRecipe(0.05), text: 'Keep fewer.' })
    expect((await mentor.client.send('POST', `/api/runs/${run.id}/proposals`, { body: { recipe: defaultRecipe } })).status).toBe(400)
    expect((await member.client.send('POST', `/api/runs/${run.id}/verdict`, { body: { verdict: 'accepted' } })).status).toBe(403)
    await post(mentor.client, `/api/runs/${run.id}/verdict`, { verdict: 'another-pass', text: 'With fewer frames, please.' }, 200)
    expect((await mentor.client.send('POST', `/api/runs/${run.id}/verdict`, { body: { verdict: 'accepted' } })).status).toBe(409)

    const after = await read(member.client, run.id)
    expect(after).toMatchObject({ review: 'another-pass', pins: [{ number: 1, x: 12.5, y: 30, author: 'Thea', guest: false }], remarks: [{ pinId: pin.id }], proposals: [{ text: 'Keep fewer.' }], reviews: [{ verdict: 'another-pass', verdictBy: 'Thea', askedBy: 'Wilma' }] })
    expect(after.history.map(({ action }) => action)).toEqual(['announced', 'filed', 'asked for a review', 'pinned a remark', 'remarked', 'proposed a change', 'asked for another pass'])
    expect((await mailsTo(member.email)).filter(mail => mail.text.includes(run.id)).map(mail => mail.subject)).toEqual(['Thea proposes a change to your run of Review pair', 'Your run of Review pair: another pass'])

    const next = await filedRun(member.client, { targetName: 'Review pair', replacesRunId: run.id })
    await post(member.client, `/api/runs/${next.id}/review`)
    await post(mentor.client, `/api/runs/${next.id}/verdict`, { verdict: 'accepted' }, 200)
    expect((await read(member.client, run.id)).replacedByRunId).toBe(next.id)
    const done = must(await mentor.client.send<Page<ReviewItem>>('GET', '/api/reviews?state=done'), 200).body
    expect(done.items.slice(0, 2).map(item => [item.run.id, item.review.verdict])).toEqual([[next.id, 'accepted'], [run.id, 'another-pass']])
    expect((must(await world.people.otherMember.client.send<Page<ReviewItem>>('GET', '/api/reviews?state=done'), 200).body).items).toEqual([])
  })

  it('of the only mentor\'s run goes to the organisers, and is not judged by its owner', async () => {
    const { mentor, organiser } = world.people
    const run = await filedRun(mentor.client)
    await post(mentor.client, `/api/runs/${run.id}/review`)
    expect((await mailsTo(organiser.email)).filter(mail => mail.text.includes(run.id))).toHaveLength(1)
    expect((await mentor.client.send('POST', `/api/runs/${run.id}/verdict`, { body: { verdict: 'accepted' } })).status).toBe(403)
    await post(organiser.client, `/api/runs/${run.id}/verdict`, { verdict: 'accepted' }, 200)
  })

  it('many pins and many verdicts at once: numbers without gaps, one verdict', async () => {
    const { member, mentor, organiser } = world.people
    const run = await filedRun(member.client)
    await Promise.all(Array.from({ length: 15 }, (_, i) => post(mentor.client.copy(), `/api/runs/${run.id}/pins`, { x: i, y: i, text: `Pin ${i}` })))
    expect((await read(member.client, run.id)).pins.map(({ number }) => number)).toEqual(Array.from({ length: 15 }, (_, i) => i + 1))
    for (const place of [{ x: 63.6, y: 1 }, { x: 1, y: 47.6 }, { x: -1, y: 1 }]) expect((await mentor.client.send('POST', `/api/runs/${run.id}/pins`, { body: { ...place, text: 'Outside' } })).status).toBe(400)
    const asked = await Promise.all(Array.from({ length: 6 }, () => member.client.copy().send('POST', `/api/runs/${run.id}/review`, { body: {} })))
    expect(asked.map(({ status }) => status).sort()).toEqual([201, 409, 409, 409, 409, 409])
    const judged = await Promise.all([mentor, organiser, mentor, organiser].map(who => who.client.copy().send('POST', `/api/runs/${run.id}/verdict`, { body: { verdict: 'accepted' } })))
    expect(judged.map(({ status }) => status).sort()).toEqual([200, 409, 409, 409])
  })
})

describe('a share link', () => {
  async function share(scope: 'look' | 'remark') {
    const { member } = world.people
    const run = await filedRun(member.client)
    const link = await post<ShareLink>(member.client, `/api/runs/${run.id}/links`, { scope, days: 7 })
    return { run, link, token: link.url!.split('/s/')[1]!, guest: new Client() }
  }

  it('opens its run and nothing of the club beyond it, and stays out of caches, referrers and indexes', async () => {
    const { run, token, guest } = await share('look')
    const answer = must(await guest.send<RunDetail>('GET', `/api/share/${token}`), 200)
    expect(answer.headers).toMatchObject({ 'cache-control': 'no-store', 'referrer-policy': 'no-referrer' })
    expect(String(answer.headers['x-robots-tag'])).toContain('noindex')
    expect(answer.body).toMatchObject({ id: run.id, history: [], replacesRunId: null, replacedByRunId: null, link: { scope: 'look' }, rights: { edit: false, remove: false, share: false, remark: false, judge: false, answer: false, download: true } })
    expect(answer.text).not.toMatch(/@test\.example|passwordHash|password_hash|uploadUrl":"/)
    for (const file of answer.body.files) {
      const got = await guest.send('GET', file.url)
      expect([file.url.startsWith(`/api/share/${token}/files/`), got.status, got.headers['cache-control'], got.headers['referrer-policy']]).toEqual([true, 200, 'no-store', 'no-referrer'])
    }
    expect((await guest.send('GET', `/api/runs/${run.id}`)).status).toBe(401)
  })

  it('is a token of 256 bits, kept only as a hash, and in no log', async () => {
    const { token, link, guest } = await share('look')
    await guest.send('GET', `/api/share/${token}`)
    await guest.send('GET', `/s/${token}`, { headers: { accept: 'text/html' } })
    expect(Buffer.from(token, 'base64url')).toHaveLength(32)
    const row = await useTestDb()('share_links').where({ id: link.id }).first()
    expect(JSON.stringify(row)).not.toContain(token)
    const audited = await useTestDb()('audit_events').where('detail', 'like', `%${token}%`)
    expect(audited).toEqual([])
    const log = readFileSync(inject('lull').log, 'utf8')
    expect(log).toContain('/api/share/…')
    expect(log).not.toContain(token)
    const listed = must(await world.people.member.client.send<ShareLink[]>('GET', `/api/runs/${row.run_id}/links`), 200).body
    expect(listed.map(one => one.url)).toEqual([undefined])
  })

  it('unknown, expired, withdrawn, or of a deleted run: the same 404 everywhere', async () => {
    const [expired, withdrawn, deleted] = [await share('remark'), await share('remark'), await share('remark')]
    const { member } = world.people
    await useTestDb()('share_links').where({ id: expired.link.id }).update({ expires_at: new Date(Date.now() - 1000) })
    must(await member.client.send('DELETE', `/api/runs/${withdrawn.run.id}/links/${withdrawn.link.id}`), 204)
    must(await member.client.send('DELETE', `/api/runs/${deleted.run.id}`), 204)
    const unknown = Buffer.alloc(32, 7).toString('base64url')
    const said = async (token: string, path: string, method = 'GET', body?: unknown) => {
      const { status, body: answer } = await new Client().send<{ message: string, data: unknown }>(method, `/api/share/${token}${path}`, body ? { body } : {})
      return { status, message: answer.message, data: answer.data }
    }
    for (const [path, method, body] of [['', 'GET', undefined], [`/files/${expired.run.files[0]!.id}`, 'GET', undefined], ['/pins', 'POST', { x: 1, y: 1, text: 'x', guestName: 'x' }], ['/remarks', 'POST', { text: 'x', guestName: 'x' }]] as const) {
      const answers = await Promise.all([unknown, expired.token, withdrawn.token, deleted.token].map(token => said(token, path, method, body)))
      expect(answers[0]!.status).toBe(404)
      for (const answer of answers) expect(answer).toEqual(answers[0])
    }
  })

  it('lets a guest remark under a name when its scope says so, and so often an hour', async () => {
    const look = await share('look')
    expect((await look.guest.send('POST', `/api/share/${look.token}/pins`, { body: { x: 1, y: 1, text: 'x', guestName: 'Ina' } })).status).toBe(403)
    const { token, guest, run } = await share('remark')
    expect((await guest.send('POST', `/api/share/${token}/remarks`, { body: { text: 'Nameless' } })).status).toBe(400)
    const pin = await post<Pin>(guest, `/api/share/${token}/pins`, { x: 3, y: 4, text: 'Here', guestName: 'Ina' })
    expect(pin).toMatchObject({ number: 1, author: 'Ina', guest: true })
    const answers = []
    for (let i = 0; i < 31; i++) answers.push(await guest.send('POST', `/api/share/${token}/remarks`, { body: { text: `Remark ${i}`, guestName: 'Ina' } }))
    expect(answers.filter(({ status }) => status === 201)).toHaveLength(29)
    expect(answers.at(-1)!.status).toBe(429)
    expect(Number(answers.at(-1)!.headers['retry-after'])).toBeGreaterThan(0)
    expect((await read(world.people.member.client, run.id)).history.filter(({ actor }) => actor === 'Ina (guest)')).toHaveLength(30)
  })
})

describe('a recipe', () => {
  it('gets versions with the hash the server counts, is shared, forked, and taken out of the lists', async () => {
    const { member, otherMember } = world.people
    const made = await post<RecipeDetail>(member.client, '/api/recipes', { name: 'Close pairs', description: 'For short nights', recipe: defaultRecipe, recipeHash: 'f'.repeat(64), ownerId: otherMember.id })
    expect(made).toMatchObject({ mine: true, shared: false, forkOf: null, versions: 1, latest: { version: 1, recipeHash: await recipeHash(defaultRecipe), author: 'Wilma' } })
    const path = `/api/recipes/${made.id}`
    expect((await member.client.send('POST', `${path}/versions`, { body: { recipe: defaultRecipe } })).status).toBe(409)
    const fractions = [0.03, 0.04, 0.06, 0.07]
    await Promise.all(fractions.map(fraction => post(member.client.copy(), `${path}/versions`, { recipe: otherRecipe(fraction), note: `${fraction}` })))
    const grown = must(await member.client.send<RecipeDetail>('GET', path), 200).body
    expect(grown.history.map(({ version }) => version)).toEqual([5, 4, 3, 2, 1])
    for (const version of grown.history) expect(version.recipeHash).toBe(await recipeHash(version.recipe))

    expect((await otherMember.client.send('GET', path)).status).toBe(404)
    must(await member.client.send('PATCH', path, { body: { shared: true } }), 200)
    const third = grown.history.find(({ version }) => version === 3)!
    const fork = await post<RecipeDetail>(otherMember.client, `${path}/fork`, { name: 'Closer pairs', versionId: third.id })
    expect(fork).toMatchObject({ mine: true, shared: false, forkOf: { recipeId: made.id, name: 'Close pairs', version: 3 }, latest: { version: 1, recipeHash: third.recipeHash } })
    // The origin names only forks that the asker may read.
    expect(must(await member.client.send<RecipeDetail>('GET', path), 200).body.forks).toEqual([])
    must(await otherMember.client.send('PATCH', `/api/recipes/${fork.id}`, { body: { shared: true } }), 200)
    expect(must(await member.client.send<RecipeDetail>('GET', path), 200).body.forks).toEqual([{ id: fork.id, name: 'Closer pairs', owner: 'Osric' }])

    const run = await filedRun(member.client, { recipeVersionId: grown.latest.id })
    must(await member.client.send('DELETE', path), 204)
    expect((await otherMember.client.send('GET', path)).status).toBe(404)
    expect(must(await member.client.send<RecipeSummary[]>('GET', '/api/recipes'), 200).body.map(({ id }) => id)).not.toContain(made.id)
    // What was made with it still says so.
    expect((await read(member.client, run.id)).recipe).toMatchObject({ name: 'Close pairs', version: 5 })
  })
})
