/** The browser's side of an upload, run in Node against the real server through a proxy that does what bad lines do. */
import { randomBytes } from 'node:crypto'
import { createServer, request, type IncomingMessage, type Server, type ServerResponse } from 'node:http'
import type { AddressInfo } from 'node:net'
import { afterAll, afterEach, beforeAll, describe, expect, it } from 'vitest'
import { Transfer, type TransferOptions } from '../../composables/uploads/transfer'
import type { RunDetail } from '../../shared/api/archive'
import type { Client } from './client'
import { announcement, announceRun, bytesOf, fileOf, headUpload, must, sampleFiles, sampleResult } from './filing'
import { closeTestDb, makeWorld } from './world'

let client: Client
let proxy: Server
beforeAll(async () => {
  client = (await makeWorld()).people.member.client
})
afterEach(() => void proxy?.close())
afterAll(closeTestDb)

/** `meddle` may answer or break a request itself and then returns true; `pass` hands it to the server. */
type Meddle = (incoming: IncomingMessage, outgoing: ServerResponse, pass: (afterwards?: 'lose the answer') => void) => boolean
const seen: string[] = []

async function throughProxy(meddle: Meddle): Promise<string> {
  seen.length = 0
  proxy = createServer((incoming, outgoing) => {
    seen.push(incoming.method!)
    const pass = (afterwards?: 'lose the answer') => {
      const onward = request(client.base + incoming.url, { method: incoming.method, headers: { ...incoming.headers, cookie: client.cookie }, agent: false }, (answer) => {
        if (afterwards) {
          answer.resume().on('end', () => outgoing.destroy())
          return
        }
        outgoing.writeHead(answer.statusCode!, answer.headers)
        answer.pipe(outgoing)
      })
      onward.on('error', () => outgoing.destroy())
      incoming.on('aborted', () => onward.destroy())
      incoming.pipe(onward)
    }
    if (!meddle(incoming, outgoing, pass)) pass()
  })
  await new Promise<void>(resolve => proxy.listen(0, '127.0.0.1', resolve))
  return `http://127.0.0.1:${(proxy.address() as AddressInfo).port}`
}

/** A file's bytes as both the library's Node build (a Buffer) and its plugin (a Blob's size) want them. */
const asBlob = (bytes: Buffer) => Object.assign(bytes, { size: bytes.length }) as unknown as Blob

async function prepare(base: string, more: Partial<TransferOptions> = {}) {
  const bytes = randomBytes(900_000)
  const files = [...sampleFiles(), { role: 'raw' as const, name: 'practice.ser', bytes }]
  const run = await announceRun(client, announcement(await sampleResult(), files))
  const detail = async () => must(await client.send<RunDetail>('GET', `/api/runs/${run.id}`), 200).body
  const make = (of: RunDetail) => new Transfer(of.files.filter(file => file.state !== 'received').map(file => ({ id: file.id, name: file.name, uploadUrl: file.uploadUrl && base + file.uploadUrl, data: asBlob(bytesOf(files, file)) })), {
    endpoint: `${base}/files`, chunkBytes: 200_000, retryDelays: [0, 20], isWell: () => Promise.resolve(true), known: async () => (await detail()).files.map(file => ({ ...file, uploadUrl: file.uploadUrl && base + file.uploadUrl })), onBytes() {}, onWaiting() {}, ...more,
  })
  return { run, bytes, detail, make }
}
const never = new AbortController().signal
const creations = () => seen.filter(method => method === 'POST').length
const allReceived = (run: RunDetail) => run.files.every(file => file.state === 'received')

describe('an upload over a bad line', () => {
  it('brings every file, each created once, over a good one', async () => {
    const { make, run, detail } = await prepare(await throughProxy(() => false))
    await make(run).run(never)
    expect(allReceived(await detail())).toBe(true)
    expect(creations()).toBe(10)
  })

  it('goes on where it stopped when every third PATCH is cut after some kilobytes', async () => {
    let patches = 0
    const { make, run, detail } = await prepare(await throughProxy((incoming, outgoing, pass) => {
      if (incoming.method !== 'PATCH' || patches++ % 3 !== 2) return false
      let got = 0
      incoming.on('data', (part: Buffer) => {
        got += part.length
        if (got > 30_000) incoming.destroy()
      })
      pass()
      void outgoing
      return true
    }))
    await make(run).run(never)
    expect(allReceived(await detail())).toBe(true)
    expect(creations()).toBe(10)
  })

  it.each([500, 502, 503, 404, 403])('never starts again when a proxy answers %s to HEAD', async (status) => {
    let patches = 0
    let heads = 0
    const { make, run, detail } = await prepare(await throughProxy((incoming, outgoing) => {
      const broken = (incoming.method === 'PATCH' && patches++ % 2 === 1) || (incoming.method === 'HEAD' && heads++ % 3 !== 2)
      if (broken) {
        incoming.resume()
        outgoing.writeHead(incoming.method === 'PATCH' ? 502 : status).end()
      }
      return broken
    }))
    await make(run).run(never)
    expect(allReceived(await detail())).toBe(true)
    expect(heads).toBeGreaterThan(2)
    expect(creations()).toBe(10)
  })

  it('takes a file for done whose last answer was lost', async () => {
    let lost = 0
    const { make, run, detail } = await prepare(await throughProxy((incoming, _, pass) => {
      const last = incoming.method === 'PATCH' && incoming.headers['content-length'] === '300' && lost++ < 4
      if (last) pass('lose the answer')
      return last
    }))
    await make(run).run(never)
    expect(lost).toBeGreaterThan(3)
    expect(allReceived(await detail())).toBe(true)
    expect(creations()).toBe(10)
  })

  it('asks nothing of a server that is unwell, and goes on when it is well', async () => {
    let unwell = 0
    const waiting: boolean[] = []
    let patches = 0
    const base = await throughProxy((incoming, outgoing) => {
      const broken = incoming.method === 'PATCH' && patches++ === 3
      if (broken) {
        unwell = 3
        incoming.resume()
        outgoing.writeHead(503).end()
      }
      return broken
    })
    const { make, run, detail } = await prepare(base, { isWell: () => Promise.resolve(unwell-- <= 0), onWaiting: now => waiting.push(now) })
    await make(run).run(never)
    expect(allReceived(await detail())).toBe(true)
    expect(waiting).toContain(true)
    expect(waiting.at(-1)).toBe(false)
  })

  it('stops without deleting what has arrived; another transfer goes on there', async () => {
    const stop = new AbortController()
    let large = 0
    const base = await throughProxy((incoming) => {
      if (incoming.method === 'PATCH' && incoming.headers['content-length'] === '200000' && ++large === 3) stop.abort(new Error('stopped'))
      return false
    })
    const { make, run, detail } = await prepare(base)
    await expect(make(run).run(stop.signal)).rejects.toThrow('stopped')
    await new Promise(resolve => setTimeout(resolve, 300))
    expect(seen, 'nothing is deleted').not.toContain('DELETE')
    const now = await detail()
    const raw = fileOf(now, 'raw')
    expect(raw).toMatchObject({ state: 'announced', uploadUrl: expect.stringMatching(/^\/files\//) })
    expect(Number((await headUpload(client, raw.uploadUrl!)).headers['upload-offset'])).toBeGreaterThanOrEqual(400_000)
    const before = creations()
    const begun = now.files.filter(file => file.state === 'received' || file.uploadUrl !== null).length
    await make(now).run(never)
    expect(allReceived(await detail())).toBe(true)
    expect(creations() - before, 'only what was not begun is created').toBe(10 - begun)
  })

  it('says what the server said of bytes that do not match, and tries no more', async () => {
    const { run, detail, bytes } = await prepare(await throughProxy(() => false))
    const raw = fileOf(run, 'raw')
    const wrong = Buffer.from(bytes)
    wrong[5]! ^= 1
    const transfer = new Transfer([{ id: raw.id, name: raw.name, uploadUrl: null, data: asBlob(wrong) }], {
      endpoint: `http://127.0.0.1:${(proxy.address() as AddressInfo).port}/files`, retryDelays: [0, 20], isWell: () => Promise.resolve(true), known: async () => (await detail()).files, onBytes() {}, onWaiting() {},
    })
    await expect(transfer.run(never)).rejects.toThrow('not those that were announced')
    expect(fileOf(await detail(), 'raw').state).toBe('refused')
    expect(creations()).toBe(1)
  })

  it('ends at once, in words, when the run is gone', async () => {
    const { make, run } = await prepare(await throughProxy(() => false))
    must(await client.send('DELETE', `/api/runs/${run.id}`), 204)
    await expect(make(run).run(never)).rejects.toThrow('could not be uploaded')
    expect(creations()).toBeLessThanOrEqual(10)
  })
})
