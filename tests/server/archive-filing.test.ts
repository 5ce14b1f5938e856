/** Announcing and filing: what is checked, what can be done again, and what many at once cannot do. */
import { randomBytes } from 'node:crypto'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import type { RunDetail } from '../../shared/api/archive'
import { defaultRecipe } from '../../shared/schemas/recipe'
import type { Client } from './client'
import { announcement, announceRun, bringFile, bytesOf, filedRun, fileSample, must, sampleFiles, sampleResult, sha256, type Sample } from './filing'
import { closeTestDb, makeClub, makePerson, makeWorld, newId, useTestDb, type World } from './world'

let world: World
let client: Client
beforeAll(async () => {
  world = await makeWorld()
  client = world.people.member.client
})
afterAll(closeTestDb)

const announce = (who: Client, body: unknown) => who.send<RunDetail & { message: string, data: { code: string } }>('POST', '/api/runs', { body })
const idsOf = (run: RunDetail) => run.files.map(({ id }) => id).sort()

describe('announcing', () => {
  it('the same run again finds the one that was announced, with what has arrived of it', async () => {
    const files = sampleFiles()
    const body = announcement(await sampleResult(), files)
    const first = await announceRun(client, body)
    await bringFile(client, first.files[0]!, bytesOf(files, first.files[0]!))
    const again = await announceRun(client, { ...body, note: 'Said later.' })
    expect([again.id, again.note, idsOf(again)]).toEqual([first.id, 'Said later.', idsOf(first)])
    expect(again.files.filter(file => file.state === 'received').map(({ id }) => id)).toEqual([first.files[0]!.id])
  })

  it('many times at once makes one run', async () => {
    const body = announcement(await sampleResult(), sampleFiles())
    const answers = await Promise.all(Array.from({ length: 12 }, () => announce(client.copy(), body)))
    expect(answers.map(({ status }) => status)).toEqual(Array(12).fill(201))
    expect(new Set(answers.map(({ body: { id } }) => id)).size).toBe(1)
  })

  it('with another keep, capture or recipe, or by another member, is another run', async () => {
    const fingerprint = sha256(randomBytes(8))
    const body = async (more: Sample) => announcement(await sampleResult({ fingerprint, ...more }), sampleFiles())
    const runs = [await announceRun(client, await body({})), await announceRun(client, await body({ keep: 11 })), await announceRun(client, await body({ fingerprint: sha256(randomBytes(8)) })),
      await announceRun(client, await body({ recipe: { ...defaultRecipe, keep: { fraction: 0.061 } } })), await announceRun(world.people.otherMember.client, await body({}))]
    expect(new Set(runs.map(({ id }) => id)).size).toBe(5)
  })

  it('replaces files that changed meanwhile and keeps the others', async () => {
    const files = sampleFiles()
    const result = await sampleResult()
    const first = await announceRun(client, announcement(result, files))
    for (const file of first.files) await bringFile(client, file, bytesOf(files, file))
    const changed = files.map(file => file.role === 'preview' ? { ...file, bytes: randomBytes(310) } : file)
    const again = await announceRun(client, announcement(result, changed))
    expect(again.files.filter(file => file.state !== 'received').map(file => file.role)).toEqual(['preview'])
    expect((await fileSample(client, announcement(result, changed), changed)).id).toBe(first.id)
  })

  it('needs each required file once, the hash of its recipe, a proper fingerprint and a day of the calendar', async () => {
    const result = await sampleResult()
    const body = announcement(result, sampleFiles())
    const bad: [string, unknown][] = [
      ['a file is missing', { ...body, files: body.files.slice(1) }], ['a file is there twice', { ...body, files: [...body.files, body.files[0]] }],
      ['hash of another recipe', { ...body, result: { ...result, recipeHash: sha256('x') } }], ['fingerprint', { ...body, result: { ...result, facts: { ...result.facts, fingerprint: 'überall'.repeat(20) } } }],
      ['day', { ...body, night: '2031-02-30' }], ['no size', { ...body, files: body.files.map(file => ({ ...file, sizeBytes: 0 })) }], ['no hash', { ...body, files: body.files.map(file => ({ ...file, sha256: 'A'.repeat(64) })) }],
    ]
    for (const [what, wrong] of bad) expect([what, (await announce(client, wrong)).status]).toEqual([what, 400])
  })

  it('names only things of the own club, and only an own filed run as the one it replaces', async () => {
    const ask = async (more: object) => (await announce(client, announcement(await sampleResult(), sampleFiles(), more))).status
    const unfiled = await announceRun(client, announcement(await sampleResult(), sampleFiles()))
    for (const replacesRunId of [(await filedRun(world.people.foreignMember.client)).id, (await filedRun(world.people.otherMember.client)).id, unfiled.id, newId()]) expect(await ask({ replacesRunId })).toBe(404)
    const secret = must(await world.people.otherMember.client.send<{ latest: { id: string } }>('POST', '/api/recipes', { body: { name: 'Secret', recipe: defaultRecipe } }), 201).body
    for (const more of [{ instrumentId: newId() }, { recipeVersionId: newId() }, { recipeVersionId: secret.latest.id }]) expect(await ask(more)).toBe(404)
  })

  it('never takes owner, club, state, role or quota from the body', async () => {
    const { id } = world.people.otherMember
    const extra = { id: newId(), ownerId: id, owner_id: id, clubId: world.foreignClubId, club_id: world.foreignClubId, state: 'filed', filedAt: '2031-01-01', reviewState: 'accepted', quotaBytes: 1e15, role: 'organiser' }
    const body = announcement(await sampleResult(), sampleFiles())
    const run = must(await announce(client, { ...extra, ...body, files: body.files.map(file => ({ ...extra, ...file, state: 'received' })) }), 201).body
    expect(run).toMatchObject({ state: 'announced', owner: { id: world.people.member.id }, review: 'none', filedAt: null })
    expect([run.id === extra.id, run.files.every(file => file.state === 'announced')]).toEqual([false, true])
    const changed = must(await client.send<RunDetail>('PATCH', `/api/runs/${run.id}`, { body: { ...extra, note: 'Changed' } }), 200).body
    expect(changed).toMatchObject({ id: run.id, state: 'announced', owner: { id: world.people.member.id }, review: 'none', note: 'Changed' })
    expect((await client.send<{ role: string }>('GET', '/api/me')).body.role).toBe('member')
  })
})

describe('the quota', () => {
  async function clubWithRoom(bytes: number) {
    const clubId = await makeClub()
    await useTestDb()('clubs').where({ id: clubId }).update({ quota_bytes: bytes })
    return [await makePerson(clubId, 'member', 'Ida'), await makePerson(clubId, 'member', 'Gero')] as const
  }

  it('of twenty announcements at once with room for one, exactly one succeeds', async () => {
    const people = await clubWithRoom(9 * 300 + 299)
    const bodies = await Promise.all(Array.from({ length: 20 }, async () => announcement(await sampleResult(), sampleFiles(300))))
    const answers = await Promise.all(bodies.map((body, i) => announce(people[i % 2]!.client.copy(), body)))
    expect(answers.map(({ status }) => status).sort()).toEqual([201, ...Array(19).fill(413)])
    expect(answers.find(({ status }) => status === 413)!.body).toMatchObject({ message: expect.stringContaining('room for'), data: { code: 'quota' } })
  })

  it('counts what is added to a run that was announced before, and refuses as a whole', async () => {
    const [{ client: ida }] = await clubWithRoom(3000)
    const result = await sampleResult()
    const files = sampleFiles(300)
    const first = await announceRun(ida, announcement(result, files))
    const withRaw = (bytes: number) => announcement(result, [...files, { role: 'raw', name: 'practice.ser', bytes: Buffer.alloc(bytes, 1) }])
    expect((await announce(ida, withRaw(1000))).status).toBe(413)
    expect(idsOf((await ida.send<RunDetail>('GET', `/api/runs/${first.id}`)).body)).toEqual(idsOf(first))
    expect((await announce(ida, withRaw(300))).status).toBe(201)
  })
})

describe('filing', () => {
  it('waits for every file, names those that are missing, and happens once', async () => {
    const files = sampleFiles()
    const run = await announceRun(client, announcement(await sampleResult(), files))
    const late = run.files.filter(({ role }) => role === 'ladder' || role === 'recipe')
    for (const file of run.files) if (!late.includes(file)) await bringFile(client, file, bytesOf(files, file))
    const early = await client.send<{ message: string, data: { missing: string[] } }>('POST', `/api/runs/${run.id}/file`)
    expect([early.status, early.body.data.missing.sort(), early.body.message]).toEqual([409, ['ladder', 'recipe'], expect.stringContaining('ladder')])
    // To others it does not exist yet.
    expect((await world.people.mentor.client.send('GET', `/api/runs/${run.id}`)).status).toBe(404)
    for (const file of late) await bringFile(client, file, bytesOf(files, file))
    const answers = await Promise.all(Array.from({ length: 8 }, () => client.copy().send<RunDetail>('POST', `/api/runs/${run.id}/file`)))
    expect(answers.map(({ status, body }) => [status, body.state])).toEqual(Array(8).fill([200, 'filed']))
    const seen = (await world.people.mentor.client.send<RunDetail>('GET', `/api/runs/${run.id}`)).body
    expect(seen.history.map(({ action }) => action)).toEqual(['announced', 'filed'])
  })

  it('a file that its owner has brought before need not come again; somebody else has to bring it', async () => {
    const files = sampleFiles()
    await fileSample(client, announcement(await sampleResult(), files), files)
    expect((await announceRun(client, announcement(await sampleResult(), files))).files.every(({ state }) => state === 'received')).toBe(true)
    expect((await announceRun(world.people.otherMember.client, announcement(await sampleResult(), files))).files.every(({ state }) => state === 'announced')).toBe(true)
  })

  it('links a run and the one it replaces both ways, and says so in the history', async () => {
    const old = await filedRun(client)
    const run = await filedRun(client, { replacesRunId: old.id })
    const before = (await client.send<RunDetail>('GET', `/api/runs/${old.id}`)).body
    expect([run.replacesRunId, before.replacedByRunId, before.history.at(-1)!.action]).toEqual([old.id, run.id, 'replaced by a newer run'])
  })

  it('deletes and restores by the owner alone; a deleted run is gone for everybody else', async () => {
    const run = await filedRun(client)
    must(await client.send('DELETE', `/api/runs/${run.id}`), 204)
    for (const path of ['', `/files/${run.files[0]!.id}`]) expect((await world.people.organiser.client.send('GET', `/api/runs/${run.id}${path}`)).status).toBe(404)
    expect((await client.send<RunDetail>('GET', `/api/runs/${run.id}`)).body.rights).toMatchObject({ restore: true, edit: false, remove: false, share: false, askReview: false })
    for (const [path, body] of [['/review', {}], ['/links', { scope: 'look', days: 1 }], ['/pins', { x: 1, y: 1, text: 'x' }], ['/remarks', { text: 'x' }]] as const) expect([path, (await client.send('POST', `/api/runs/${run.id}${path}`, { body })).status]).toEqual([path, 404])
    expect((await client.send('POST', `/api/runs/${run.id}/file`)).status).toBe(409)
    const back = must(await client.send<RunDetail>('POST', `/api/runs/${run.id}/restore`), 200).body
    expect([back.state, back.filedAt, back.history.map(({ action }) => action)]).toEqual(['filed', run.filedAt, ['announced', 'filed', 'deleted', 'restored']])
  })
})
