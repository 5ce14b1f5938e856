/** The upload routes as tus 1.0.0 has them (https://tus.io/protocols/resumable-upload), and who may use them. */
import { randomBytes } from 'node:crypto'
import { existsSync } from 'node:fs'
import { afterAll, beforeAll, describe, expect, inject, it } from 'vitest'
import type { RunDetail } from '../../shared/api/archive'
import type { Client } from './client'
import { announcement, announceRun, beginUpload, bringFile, bytesOf, createUpload, fileOf, headUpload, metadataOf, must, patchUpload, sampleFiles, sampleResult, tus } from './filing'
import { closeTestDb, makeWorld, newId, type World } from './world'

let world: World
let client: Client
beforeAll(async () => {
  world = await makeWorld()
  client = world.people.member.client
})
afterAll(closeTestDb)

async function begin() {
  const files = sampleFiles(1000)
  const run = await announceRun(client, announcement(await sampleResult(), files))
  const file = fileOf(run, 'stack')
  return { run, file, files, bytes: bytesOf(files, file), url: await beginUpload(client, file) }
}
const offsetOf = async (url: string) => Number(must(await headUpload(client, url), 200).headers['upload-offset'])

describe('the protocol', () => {
  it('creates with a relative place; HEAD gives offset and length and is not cached', async () => {
    const { url } = await begin()
    expect(url).toMatch(/^\/files\/[\w-]{22}$/)
    expect((await headUpload(client, url)).headers).toMatchObject({ 'upload-offset': '0', 'upload-length': '1000', 'cache-control': 'no-store', 'tus-resumable': '1.0.0' })
  })

  it('answers 409 to a wrong offset and changes nothing', async () => {
    const { url, bytes } = await begin()
    must(await patchUpload(client, url, 0, bytes.subarray(0, 400)), 204)
    for (const offset of [0, 399, 401, 1000]) expect((await patchUpload(client, url, offset, bytes.subarray(0, 100))).status).toBe(409)
    expect(await offsetOf(url)).toBe(400)
    must(await patchUpload(client, url, 400, bytes.subarray(400)), 204)
  })

  it.each(['0.2.2', '1.0.1', '', undefined])('answers 412 with Tus-Version to version %s', async (version) => {
    const { url, file } = await begin()
    const headers: Record<string, string> = version === undefined ? {} : { 'tus-resumable': version }
    for (const [method, path, more] of [['HEAD', url, {}], ['PATCH', url, { 'upload-offset': '0', 'content-type': 'application/offset+octet-stream' }], ['POST', '/files', { 'upload-length': '5', 'upload-metadata': metadataOf(file.id) }], ['DELETE', url, {}]] as const) {
      const answer = await client.send(method, path, { headers: { ...more, ...headers } })
      expect([method, answer.status, answer.headers['tus-version']]).toEqual([method, 412, '1.0.0'])
    }
  })

  it.each(['application/json', 'application/octet-stream', undefined])('answers 415 to a PATCH of type %s', async (type) => {
    const { url } = await begin()
    expect((await client.send('PATCH', url, { raw: Buffer.from('abc'), headers: { ...tus, 'upload-offset': '0', ...(type ? { 'content-type': type } : {}) } })).status).toBe(415)
    expect(await offsetOf(url)).toBe(0)
  })

  it('answers 413 to more bytes than were announced', async () => {
    const { url, bytes, file } = await begin()
    expect((await patchUpload(client, url, 0, Buffer.concat([bytes, randomBytes(1)]))).status).toBe(413)
    expect(await offsetOf(url)).toBe(0)
    expect((await createUpload(client, file.id, 64 * 2 ** 30 + 1)).status).toBe(413)
  })

  it.each(['0', '-5', '1.5', '1e3', '0x10', ' ', 'many', '99999999999999999999', '1001'])('answers 400 to Upload-Length "%s"', async (length) => {
    const { file } = await begin()
    expect((await createUpload(client, file.id, length)).status).toBe(400)
  })

  it('names no inside when it fails, whatever the metadata hold', async () => {
    const { file } = await begin()
    for (const metadata of ['fileId', 'fileId ***', `fileId ${Buffer.from('śnieg\u0000').toString('base64')}`, `filename ${Buffer.from('дом.fits').toString('base64')},${metadataOf(file.id)}`]) {
      const answer = await client.send('POST', '/files', { headers: { ...tus, 'upload-length': '1000', 'upload-metadata': metadata } })
      expect(answer.status).toBeLessThan(500)
      expect(answer.text).not.toMatch(/\.data|node_modules|Error:|ENOENT|select /)
    }
  })

  it('reads nothing back, before and after the end', async () => {
    const { url, bytes } = await begin()
    expect((await client.send('GET', url, { headers: tus })).status).toBe(405)
    must(await patchUpload(client, url, 0, bytes), 204)
    expect((await client.send('GET', url, { headers: tus })).status).toBe(405)
    expect((await client.send('POST', url, { headers: { ...tus, 'x-http-method-override': 'GET' } })).status).toBe(400)
  })

  it('lets of six connections one write, and tells the others to ask again', async () => {
    const { url, bytes } = await begin()
    const statuses = (await Promise.all(Array.from({ length: 6 }, () => patchUpload(client.copy(), url, 0, bytes.subarray(0, 700))))).map(({ status }) => status)
    expect(statuses.filter(status => status === 204)).toHaveLength(1)
    expect(statuses.filter(status => ![204, 409, 423].includes(status))).toEqual([])
    expect(await offsetOf(url)).toBe(700)
  })
})

describe('whose uploads', () => {
  it('a foreign one answers as a missing one does', async () => {
    const { url, file, bytes } = await begin()
    const said = ({ status, text }: { status: number, text: string }) => ({ status, text })
    for (const name of ['otherMember', 'mentor', 'organiser', 'foreignMember'] as const) {
      const stranger = world.people[name].client
      const missing = `/files/${newId()}`
      expect(said(await headUpload(stranger, url))).toEqual(said(await headUpload(stranger, missing)))
      expect(said(await patchUpload(stranger, url, 0, bytes))).toEqual(said(await patchUpload(stranger, missing, 0, bytes)))
      expect(said(await stranger.send('DELETE', url, { headers: tus }))).toEqual(said(await stranger.send('DELETE', missing, { headers: tus })))
      expect(said(await createUpload(stranger, file.id, 1000))).toEqual(said(await createUpload(stranger, newId(), 1000)))
      expect((await headUpload(stranger, url)).status).toBe(404)
    }
    expect(await offsetOf(url)).toBe(0)
  })

  it('closed once the run is deleted', async () => {
    const { run, url, bytes } = await begin()
    must(await client.send('DELETE', `/api/runs/${run.id}`), 204)
    expect((await patchUpload(client, url, 0, bytes)).status).toBe(404)
  })

  it('nobody is given a file for knowing its hash', async () => {
    const { file, url, bytes } = await begin()
    must(await patchUpload(client, url, 0, bytes), 204)
    const thief = world.people.foreignMember.client
    const mine = await announceRun(thief, announcement(await sampleResult(), sampleFiles(1000).map(one => one.role === 'stack' ? { ...one, bytes } : one)))
    const wanted = mine.files.find(one => one.sha256 === file.sha256)!
    expect(wanted.state).toBe('announced')
    // An upload that is begun and ended leaves no bytes; the store has the file, but not from this member.
    must(await thief.send('DELETE', await beginUpload(thief, wanted), { headers: tus }), 204)
    expect((await thief.send<{ data: { missing: string[] } }>('POST', `/api/runs/${mine.id}/file`)).body.data.missing).toContain('stack')
    expect((await thief.send('GET', `/api/runs/${mine.id}/files/${wanted.id}`)).status).toBe(404)
  })
})

describe('the end of an upload', () => {
  it('is told again to whoever missed the answer, cannot be undone, and leaves no file of the upload', async () => {
    const { run, file, url, bytes } = await begin()
    must(await patchUpload(client, url, 0, bytes), 204)
    expect((await headUpload(client, url)).headers).toMatchObject({ 'upload-offset': '1000', 'upload-length': '1000', 'cache-control': 'no-store' })
    expect((await patchUpload(client, url, 1000, Buffer.alloc(0))).status).toBe(204)
    expect((await patchUpload(client, url, 500, bytes.subarray(500))).status).toBe(409)
    expect((await client.send('DELETE', url, { headers: tus })).status).toBe(403)
    expect((await createUpload(client, file.id, 1000)).status).toBe(409)
    expect(fileOf((await client.send<RunDetail>('GET', `/api/runs/${run.id}`)).body, 'stack')).toMatchObject({ state: 'received', problem: null, uploadUrl: null })
    for (const ending of ['', '.json']) expect(existsSync(`${inject('lull').folder}/uploads/${url.slice(7)}${ending}`)).toBe(false)
  })

  it('refuses bytes that are not those announced, says so, and takes the right ones after', async () => {
    const { run, files, url, bytes } = await begin()
    const answer = await patchUpload(client, url, 0, randomBytes(1000))
    expect([answer.status, answer.text]).toEqual([422, expect.stringContaining('not those that were announced')])
    const refused = fileOf((await client.send<RunDetail>('GET', `/api/runs/${run.id}`)).body, 'stack')
    expect(refused.state).toBe('refused')
    for (const other of run.files) if (other.role !== 'stack') await bringFile(client, other, bytesOf(files, other))
    const early = await client.send<{ data: { missing: string[] } }>('POST', `/api/runs/${run.id}/file`)
    expect([early.status, early.body.data.missing]).toEqual([409, ['stack']])
    await bringFile(client, refused, bytes)
    expect(must(await client.send<RunDetail>('POST', `/api/runs/${run.id}/file`), 200).body.state).toBe('filed')
  })
})
