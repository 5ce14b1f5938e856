/** A server that is killed at any moment: the same step can be taken again, no byte is brought twice, nothing is left behind. */
import { randomBytes } from 'node:crypto'
import { existsSync, mkdirSync, readFileSync, renameSync, truncateSync, utimesSync, writeFileSync } from 'node:fs'
import { request } from 'node:http'
import path from 'node:path'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { root } from '../../scripts/lib/system.mjs'
import { startTestServer } from '../../scripts/lib/test-server.mjs'
import type { RunDetail } from '../../shared/api/archive'
import { type Client, useOwnServer } from './client'
import { announcement, announceRun, beginUpload, bringFile, bytesOf, fileOf, fileSample, headUpload, must, patchUpload, sampleFiles, sampleResult, sha256, tus, type SampleFile } from './filing'
import { closeTestDb, makeWorld, useTestDb } from './world'

let server: Awaited<ReturnType<typeof startTestServer>>
let client: Client
const stops: (() => Promise<void>)[] = []

beforeAll(async () => {
  server = await startTestServer(path.join(root, '.data-test', 'interrupted'), { onStart: (stop: () => Promise<void>) => stops.push(stop) })
  useOwnServer(server)
  client = (await makeWorld()).people.member.client
})
afterAll(async () => {
  await closeTestDb()
  await server?.stop()
  for (const stop of stops) await stop()
})

const restart = async () => {
  await server.kill()
  await server.start()
}
const at = (...parts: string[]) => path.join(server.folder, ...parts)
const stored = (hash: string) => at('store', hash.slice(0, 2), hash)
const uploadAt = (url: string) => at('uploads', url.slice('/files/'.length))
const detail = async (id: string) => must(await client.send<RunDetail>('GET', `/api/runs/${id}`), 200).body
/** What a boot settles happens beside the first requests. */
const settled = (run: RunDetail, state: string) => expect.poll(async () => fileOf(await detail(run.id), 'raw').state, { timeout: 10_000 }).toBe(state)
const offsetOf = async (url: string) => Number(must(await headUpload(client, url), 200).headers['upload-offset'])

/** All required files small, and one capture of some size. */
async function announceLarge(bytesCount: number) {
  const bytes = randomBytes(bytesCount)
  const files: SampleFile[] = [...sampleFiles(), { role: 'raw', name: 'practice.ser', bytes }]
  const run = await announceRun(client, announcement(await sampleResult(), files))
  return { run, raw: fileOf(run, 'raw'), bytes, files }
}
async function begun() {
  const large = await announceLarge(1_000_000)
  const url = await beginUpload(client, large.raw)
  must(await patchUpload(client, url, 0, large.bytes.subarray(0, 700_000)), 204)
  return { ...large, url, upload: uploadAt(url) }
}

/** A PATCH that sends the rest of the bytes piece by piece; `until` is called after each piece and may cut it. */
function trickle(url: string, offset: number, bytes: Buffer, pieceBytes: number, pauseMs: number) {
  const outgoing = request(client.base + url, { method: 'PATCH', agent: false, headers: { ...tus, 'cookie': client.cookie, 'content-type': 'application/offset+octet-stream', 'upload-offset': String(offset), 'content-length': String(bytes.length - offset) } })
  let sent = 0
  const done = new Promise<number | null>((resolve) => {
    outgoing.on('response', answer => answer.resume().on('end', () => resolve(answer.statusCode!)).on('error', () => resolve(null)))
    outgoing.on('error', () => resolve(null))
    outgoing.on('close', () => resolve(null))
  })
  void (async () => {
    for (let from = offset; from < bytes.length && !outgoing.destroyed; from += pieceBytes) {
      outgoing.write(bytes.subarray(from, from + pieceBytes))
      sent += pieceBytes
      await new Promise(resolve => setTimeout(resolve, pauseMs))
    }
    outgoing.end()
  })()
  return { sent: () => sent, done, cut: () => outgoing.destroy() }
}

describe('a kill in the middle of an upload', () => {
  it('keeps what has arrived; the upload goes on there and ends with the same SHA-256', async () => {
    const { run, raw, bytes, files } = await announceLarge(12 * 2 ** 20)
    const url = await beginUpload(client, raw)
    let offset = 0
    for (let kill = 0; kill < 3; kill++) {
      const writing = trickle(url, offset, bytes, 128 * 1024, 5)
      await expect.poll(writing.sent, { timeout: 20_000, interval: 5 }).toBeGreaterThan(2 * 2 ** 20)
      await restart()
      expect(await writing.done).toBeNull()
      const now = await offsetOf(url)
      expect(now, 'bytes after a kill').toBeGreaterThan(offset)
      offset = now
      // The run says where it goes on, so that another browser can.
      expect(fileOf(await detail(run.id), 'raw').uploadUrl).toBe(url)
    }
    must(await patchUpload(client, url, offset, bytes.subarray(offset)), 204)
    const again = await fileSample(client, announcement(run.result, files), files)
    expect([again.id, again.state]).toEqual([run.id, 'filed'])
    expect(sha256(readFileSync(stored(raw.sha256)))).toBe(raw.sha256)
  })
})

describe('a kill at any moment of the last step', () => {
  it.each([0, 3, 8, 15, 25, 40, 70])('%s ms after it began, the same steps lead to the filed run', async (delay) => {
    const { run, raw, bytes, files } = await announceLarge(6 * 2 ** 20)
    for (const file of run.files) if (file.role !== 'raw') await bringFile(client, file, bytesOf(files, file))
    const url = await beginUpload(client, raw)
    const rest = bytes.length - 100_000
    must(await patchUpload(client, url, 0, bytes.subarray(0, rest)), 204)
    // The last bytes, and without waiting for their answer the request to file.
    const asked = [patchUpload(client, url, rest, bytes.subarray(rest)), client.copy().send('POST', `/api/runs/${run.id}/file`)].map(one => one.catch(() => null))
    await new Promise(resolve => setTimeout(resolve, delay))
    await restart()
    await Promise.all(asked)
    const now = await detail(run.id)
    const filed = now.state === 'filed' ? now : await fileSample(client, announcement(run.result, files), files)
    expect([filed.id, filed.state]).toEqual([run.id, 'filed'])
    for (const file of filed.files) expect(sha256(readFileSync(stored(file.sha256))), file.role).toBe(file.sha256)
    for (const ending of ['', '.json']) await expect.poll(() => existsSync(`${uploadAt(url)}${ending}`), { timeout: 5000 }).toBe(false)
    expect(await useTestDb()('audit_events').where({ subject_id: run.id, action: 'filed' }), 'in the history once').toHaveLength(1)
  })
})

describe('what a kill can leave between two steps is settled at the next start', () => {
  it('all bytes there, nothing checked', async () => {
    const { run, raw, bytes, upload } = await begun()
    await server.kill()
    writeFileSync(upload, bytes)
    await server.start()
    await settled(run, 'received')
    expect(sha256(readFileSync(stored(raw.sha256)))).toBe(raw.sha256)
    await expect.poll(() => existsSync(upload)).toBe(false)
  })

  it('checked and moved, the row not written', async () => {
    const { run, raw, bytes, upload } = await begun()
    await server.kill()
    await useTestDb()('run_files').where({ id: raw.id }).update({ received_at: new Date() })
    mkdirSync(path.dirname(stored(raw.sha256)), { recursive: true })
    writeFileSync(upload, bytes)
    renameSync(upload, stored(raw.sha256))
    await server.start()
    await settled(run, 'received')
  })

  it('all bytes there, and they are the wrong ones', async () => {
    const { run, bytes, upload } = await begun()
    await server.kill()
    writeFileSync(upload, randomBytes(bytes.length))
    await server.start()
    await settled(run, 'refused')
  })

  it('refused and moved aside, the row not written: it can be brought again', async () => {
    const { run, raw, bytes, upload, url } = await begun()
    await server.kill()
    mkdirSync(at('refused'), { recursive: true })
    renameSync(upload, at('refused', raw.id))
    await server.start()
    expect([404, 410]).toContain((await headUpload(client, url)).status)
    await bringFile(client, raw, bytes)
    await settled(run, 'received')
  })

  it.each(['', '{"id":"', 'null'])('an info file torn to %j', async (text) => {
    const { run, bytes, upload, url } = await begun()
    await server.kill()
    writeFileSync(`${upload}.json`, text)
    await server.start()
    await expect.poll(async () => (await headUpload(client, url)).headers['upload-offset'], { timeout: 10_000 }).toBe('700000')
    must(await patchUpload(client, url, 700_000, bytes.subarray(700_000)), 204)
    await settled(run, 'received')
  })
})

describe('a connection that is cut again and again', () => {
  it('never takes the offset back, and the bytes are the same', async () => {
    const { run, raw, bytes } = await announceLarge(2 * 2 ** 20)
    const url = await beginUpload(client, raw)
    let offset = 0
    for (let cut = 0; cut < 12; cut++) {
      const writing = trickle(url, offset, bytes, 31_000 + 1111 * cut, 5)
      await expect.poll(writing.sent, { interval: 5 }).toBeGreaterThan(90_000)
      writing.cut()
      await writing.done
      const now = await offsetOf(url)
      expect(now).toBeGreaterThanOrEqual(offset)
      offset = now
    }
    expect(offset, 'something arrived in spite of the cuts').toBeGreaterThan(0)
    must(await patchUpload(client, url, offset, bytes.subarray(offset)), 204)
    await settled(run, 'received')
    expect(sha256(readFileSync(stored(raw.sha256)))).toBe(raw.sha256)
  })
})

describe('the sweep', () => {
  const DAY = 86_400_000
  const age = (file: string, days: number) => utimesSync(file, new Date(Date.now() - days * DAY), new Date(Date.now() - days * DAY))
  const swept = (file: string) => expect.poll(() => existsSync(file), { timeout: 10_000 }).toBe(false)

  it('takes uploads that nobody added to for a week, and lets those begin again', async () => {
    const old = await begun()
    const young = await begun()
    for (const ending of ['', '.json']) age(`${old.upload}${ending}`, 8)
    // Begun long ago, but bytes came yesterday: that counts.
    age(`${young.upload}.json`, 60)
    age(young.upload, 1)
    await restart()
    await swept(old.upload)
    expect(await offsetOf(young.url)).toBe(700_000)
    await bringFile(client, fileOf(await detail(old.run.id), 'raw'), old.bytes)
    await settled(old.run, 'received')
  })

  it('leaves finished files however old; takes stored, refused and upload files that no row knows', async () => {
    const files = sampleFiles()
    const run = await fileSample(client, announcement(await sampleResult(), files), files)
    for (const file of run.files) age(stored(file.sha256), 400)
    const [orphan, young] = [sha256(randomBytes(8)), sha256(randomBytes(8))]
    for (const hash of [orphan, young]) {
      mkdirSync(path.dirname(stored(hash)), { recursive: true })
      writeFileSync(stored(hash), 'x')
    }
    mkdirSync(at('refused'), { recursive: true })
    const [refused, nobodys] = [at('refused', 'old-one'), at('uploads', 'nobodys-upload-0000000')]
    for (const file of [refused, nobodys]) writeFileSync(file, 'x')
    age(stored(orphan), 2)
    age(refused, 31)
    age(nobodys, 2)
    await restart()
    for (const file of [stored(orphan), refused, nobodys]) await swept(file)
    expect(existsSync(stored(young))).toBe(true)
    for (const file of run.files) expect(sha256(readFileSync(stored(file.sha256)))).toBe(file.sha256)
  })

  it('gives up runs of which nothing came for thirty days; their owner can restore them', async () => {
    const quiet = await announceLarge(1000)
    const busy = await begun()
    await useTestDb()('runs').whereIn('id', [quiet.run.id, busy.run.id]).update({ created_at: new Date(Date.now() - 31 * DAY) })
    await restart()
    await expect.poll(async () => (await detail(quiet.run.id)).state, { timeout: 10_000 }).toBe('deleted')
    expect((await detail(busy.run.id)).state).toBe('announced')
    expect(must(await client.send<RunDetail>('POST', `/api/runs/${quiet.run.id}/restore`), 200).body.state).toBe('announced')
  })

  it('removes for good what was deleted over thirty days ago, and its bytes only if no other run has them', async () => {
    const shared = sampleFiles()
    const first = await fileSample(client, announcement(await sampleResult(), shared), shared)
    const other = shared.map(file => file.role === 'stack' ? { ...file, bytes: randomBytes(300) } : file)
    const second = await fileSample(client, announcement(await sampleResult(), other), other)
    must(await client.send('DELETE', `/api/runs/${second.id}`), 204)
    await useTestDb()('runs').where({ id: second.id }).update({ deleted_at: new Date(Date.now() - 31 * DAY) })
    expect((await client.send('POST', `/api/runs/${second.id}/restore`)).status).toBe(410)
    await restart()
    await swept(stored(fileOf(second, 'stack').sha256))
    expect((await client.send('GET', `/api/runs/${second.id}`)).status).toBe(404)
    for (const file of first.files) expect(sha256(readFileSync(stored(file.sha256)))).toBe(file.sha256)
  })

  it('does not file a run whose stored file was damaged: its bytes are asked for again', async () => {
    const { run, bytes, files } = await announceLarge(1000)
    for (const file of run.files) await bringFile(client, file, bytesOf(files, file))
    truncateSync(stored(fileOf(run, 'raw').sha256), 10)
    const refused = await client.send<{ data: { missing: string[] } }>('POST', `/api/runs/${run.id}/file`)
    expect([refused.status, refused.body.data.missing]).toEqual([409, ['raw']])
    await bringFile(client, fileOf(await detail(run.id), 'raw'), bytes)
    expect(must(await client.send<RunDetail>('POST', `/api/runs/${run.id}/file`), 200).body.state).toBe('filed')
  })
})
