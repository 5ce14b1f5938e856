/** The archive as lists: filters, orders, pages, CSV; and the bytes of filed runs by ranges (RFC 9110, sections 13 and 14). */
import { request } from 'node:http'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import type { RunDetail, RunPage } from '../../shared/api/archive'
import type { Client } from './client'
import { announcement, fileOf, fileSample, must, sampleFiles, sampleResult, bytesOf, type SampleFile } from './filing'
import { closeTestDb, makeWorld, useTestDb, type World } from './world'

let world: World
let client: Client
let runs: RunDetail[]
let files: SampleFile[]

beforeAll(async () => {
  world = await makeWorld()
  client = world.people.member.client
  files = sampleFiles()
  runs = []
  const made = [
    { who: client, targetName: 'Alder pair', night: '2031-03-04', note: 'First light of the new mirror.', fwhm: 4.2 },
    { who: client, targetName: '=HYPERLINK("x")', night: '2031-03-05', note: '100 % of it', fwhm: null },
    { who: world.people.otherMember.client, targetName: 'Birch, "double"', night: '2031-03-06', note: '', fwhm: 3.1 },
  ]
  for (const { who, targetName, night, note, fwhm } of made) {
    const result = await sampleResult()
    result.figures.fwhmPx = fwhm
    runs.push(await fileSample(who, announcement(result, files, { targetName, night, note }), files))
  }
  await fileSample(world.people.foreignMember.client, announcement(await sampleResult(), files, { targetName: 'Alder pair', night: '2031-03-04' }), files)
})
afterAll(closeTestDb)

const list = async (query: string, who = client) => must(await who.send<RunPage>('GET', `/api/runs?${query}`), 200).body
const names = async (query: string) => (await list(query)).items.map(run => run.target.name)

describe('the list', () => {
  it('holds the club’s own filed runs, newest filing first', async () => {
    const page = await list('')
    expect(page).toMatchObject({ total: 3, nights: 3, page: 1 })
    expect(page.items.map(run => run.id)).toEqual(runs.map(run => run.id).reverse())
    expect((await list('', world.people.foreignMember.client)).total).toBe(1)
  })

  it('filters by night, member, target and words, where % and _ are only characters', async () => {
    expect(await names('from=2031-03-05&to=2031-03-05')).toEqual(['=HYPERLINK("x")'])
    expect(await names(`member=${world.people.otherMember.id}`)).toEqual(['Birch, "double"'])
    expect(await names(`target=${runs[0]!.target.id}`)).toEqual(['Alder pair'])
    expect(await names('search=mirror')).toEqual(['Alder pair'])
    expect(await names(`search=${encodeURIComponent('100 %')}`)).toEqual(['=HYPERLINK("x")'])
    expect(await names('search=_')).toEqual([])
    expect(await names('search=oak')).toEqual([])
  })

  it('sorts either way, a missing figure last both times', async () => {
    expect(await names('sort=target&order=asc')).toEqual(['=HYPERLINK("x")', 'Alder pair', 'Birch, "double"'])
    expect(await names('sort=fwhm&order=asc')).toEqual(['Birch, "double"', 'Alder pair', '=HYPERLINK("x")'])
    expect(await names('sort=fwhm&order=desc')).toEqual(['Alder pair', 'Birch, "double"', '=HYPERLINK("x")'])
  })

  it('comes in pages that together are the whole', async () => {
    const pages = await Promise.all([1, 2, 3].map(page => list(`sort=night&order=asc&pageSize=1&page=${page}`)))
    expect(pages.map(page => page.items.length)).toEqual([1, 1, 1])
    expect(pages.flatMap(page => page.items.map(run => run.id))).toEqual(runs.map(run => run.id))
    expect((await list('page=4&pageSize=1')).items).toEqual([])
  })

  it('refuses what is no filter with 400', async () => {
    for (const query of ['page=0', 'pageSize=101', 'sort=size', 'from=2031-02-30', 'kind=galaxy', 'member=x']) expect((await client.send('GET', `/api/runs?${query}`)).status, query).toBe(400)
  })

  it('says which run replaces another', async () => {
    const body = announcement(await sampleResult(), files, { targetName: 'Alder pair', night: '2031-03-07', replacesRunId: runs[0]!.id })
    const newer = await fileSample(client, body, files)
    const items = (await list('sort=night&order=asc')).items
    expect(items[0]).toMatchObject({ id: runs[0]!.id, replacedByRunId: newer.id })
    expect(items[1]).toMatchObject({ id: runs[1]!.id, replacedByRunId: null })
    must(await client.send('DELETE', `/api/runs/${newer.id}`), 204)
    expect((await list('sort=night&order=asc')).items[0]!.replacedByRunId).toBeNull()
  })
})

describe('the list as CSV', () => {
  // RFC 4180 for quoting; OWASP's "CSV Injection" for cells that a spreadsheet would take for a formula.
  it('has one line a run, guards formulas and leaves numbers alone', async () => {
    const answer = must(await client.send('GET', '/api/runs/export?sort=night&order=asc'), 200)
    expect(answer.headers['content-type']).toBe('text/csv; charset=utf-8')
    const [header, first, second, third, end] = answer.text.split('\r\n')
    expect(header).toMatch(/^night,target,/)
    expect(first).toMatch(/^2031-03-04,Alder pair,star,Wilma,,,,10,10,100,4\.2,0\.1,/)
    expect(second).toContain('"\'=HYPERLINK(""x"")"')
    expect(third).toContain('"Birch, ""double"""')
    expect(end).toBe('')
  })
  it('follows the filters', async () => {
    expect(must(await client.send('GET', '/api/runs/export?search=mirror'), 200).text.split('\r\n')).toHaveLength(3)
  })
})

describe('the bytes of a filed run', () => {
  const get = (headers: Record<string, string> = {}, method = 'GET') => client.send(method, fileOf(runs[0]!, 'stack').url, { headers })

  it('come whole, by parts, from the end, and not at all where there are none', async () => {
    const bytes = bytesOf(files, fileOf(runs[0]!, 'stack'))
    const size = bytes.length
    const whole = must(await get(), 200)
    expect([whole.headers['content-length'], whole.headers['accept-ranges']]).toEqual([String(size), 'bytes'])
    for (const [range, start, end] of [['bytes=0-9', 0, 9], ['bytes=290-', 290, size - 1], ['bytes=-5', size - 5, size - 1], [`bytes=10-${size + 99}`, 10, size - 1]] as const) {
      const part = must(await get({ range }), 206)
      expect(part.headers['content-range']).toBe(`bytes ${start}-${end}/${size}`)
      expect(part.headers['content-length']).toBe(String(end - start + 1))
    }
    expect(must(await get({ range: `bytes=${size}-` }), 416).headers['content-range']).toBe(`bytes */${size}`)
    expect(must(await get({ range: 'bytes=9-3' }), 200).headers['content-length']).toBe(String(size))
  })

  it('are the bytes that were filed', async () => {
    const bytes = bytesOf(files, fileOf(runs[0]!, 'stack'))
    const found = await new Promise<Buffer>((resolve, reject) => {
      request(client.base + fileOf(runs[0]!, 'stack').url, { headers: { cookie: client.cookie, range: 'bytes=17-120' } }, (incoming) => {
        const parts: Buffer[] = []
        incoming.on('data', (part: Buffer) => parts.push(part)).on('end', () => resolve(Buffer.concat(parts))).on('error', reject)
      }).on('error', reject).end()
    })
    expect(found.equals(bytes.subarray(17, 121))).toBe(true)
  })

  it('are not sent again to whoever has them', async () => {
    const etag = String(must(await get(), 200).headers.etag)
    expect((await get({ 'if-none-match': etag })).status).toBe(304)
    expect((await get({ 'if-none-match': `"other", W/${etag}` })).status).toBe(304)
    expect((await get({ 'range': 'bytes=0-9', 'if-range': '"other"' })).status).toBe(200)
    expect((await get({ 'range': 'bytes=0-9', 'if-range': etag })).status).toBe(206)
    expect(must(await get({}, 'HEAD'), 200).text).toBe('')
  })

  it('say that the store lacks them instead of sending half', async () => {
    const lone = sampleFiles()
    const run = await fileSample(client, announcement(await sampleResult(), lone), lone)
    await useTestDb()('run_files').where({ id: fileOf(run, 'stack').id }).update({ size_bytes: 301 })
    expect((await client.send('GET', fileOf(run, 'stack').url)).status).toBe(503)
  })
})

describe('a request', () => {
  const post = (path: string, parts: string[], headers: Record<string, string> = {}) => new Promise<number>((resolve, reject) => {
    const outgoing = request(client.base + path, { method: 'POST', headers: { 'cookie': client.cookie, 'content-type': 'application/json', 'transfer-encoding': 'chunked', ...headers } }, (incoming) => {
      incoming.resume()
      resolve(incoming.statusCode!)
    })
    outgoing.on('error', reject)
    for (const part of parts) outgoing.write(part)
    outgoing.end()
  })

  it('of no announced length is stopped at the limit too', async () => {
    const mega = 'x'.repeat(2 ** 20)
    expect(await post('/api/targets', ['{"name":"', mega, mega, mega, mega, mega, '"}'])).toBe(413)
    expect(await post('/api/targets', ['{"name":"In parts","kind":', '"star"}'])).toBeLessThan(300)
  })
})
