/** A run as the bench would announce it, with small files of random bytes; and the tus protocol, spoken by hand. */
import { createHash, randomBytes } from 'node:crypto'
import type { AnnounceBody, RunDetail, RunFile } from '../../shared/api/archive'
import { recipeHash } from '../../shared/recipe/canonical'
import { defaultRecipe, type Recipe } from '../../shared/schemas/recipe'
import { requiredFileRoles, type FileRole, type RunResult, type StackFigures } from '../../shared/schemas/run'
import type { Answer, Client, Send } from './client'

export const sha256 = (bytes: Buffer | string) => createHash('sha256').update(bytes).digest('hex')

const figures = (count: number): StackFigures => ({ count, fraction: count / 100, sharpness: 1.5, noise: 2, peak: 900, signalToNoise: 450, fwhmPx: 4.2, fwhmErrPx: 0.1, strehl: null })

export interface Sample { recipe?: Recipe, fingerprint?: string, keep?: number }
export async function sampleResult({ recipe = defaultRecipe, fingerprint = sha256(randomBytes(8)), keep = 10 }: Sample = {}): Promise<RunResult> {
  return {
    facts: {
      name: 'practice.ser', format: 'ser', fileCount: 1, sizeBytes: 1000, fingerprint, width: 64, height: 48, frameCount: 100, declaredFrameCount: 100, planes: 1, mosaic: 'none',
      sampleKind: 'uint8', bitDepth: 8, saturation: 255, byteOrder: { value: 'little', decidedBy: 'format' }, times: { start: null, end: null, source: 'none', medianIntervalMs: null, droppedFrames: 0, disordered: false },
      exposureMs: null, observer: '', instrument: '', telescope: '', object: '', filter: '', apertureMm: null, focalLengthMm: null, pixelSizeUm: null, notes: [],
    },
    recipe, recipeHash: await recipeHash(recipe), kind: 'star', chosen: { blurPx: 1, windowPx: 64, centre: { x: 32, y: 24 } }, keep: { fraction: keep / 100, count: keep }, ranked: 100, setAside: {},
    figures: figures(keep), proofs: [figures(1)], average: figures(100), ladder: { counts: [1, 10, 100], width: 64, height: 48, planes: 1 }, stretch: { black: 0, white: 255, gamma: 1 },
    provenance: { lullVersion: '0', path: 'plain', engine: 'test', timings: {} },
  }
}

export interface SampleFile { role: FileRole, name: string, bytes: Buffer }
export const sampleFiles = (bytes = 300): SampleFile[] => requiredFileRoles.map(role => ({ role, name: `${role}.bin`, bytes: randomBytes(bytes) }))

export const announcement = (result: RunResult, files: SampleFile[], more: Partial<AnnounceBody> = {}): AnnounceBody => ({
  targetName: 'Practice pair', night: '2031-03-04', result, files: files.map(({ role, name, bytes }) => ({ role, name, sizeBytes: bytes.length, sha256: sha256(bytes) })), ...more,
})

export const tus = { 'tus-resumable': '1.0.0' }
export const metadataOf = (fileId: string) => `fileId ${Buffer.from(fileId).toString('base64')}`
export const createUpload = (client: Client, fileId: string, length: number | string, more: Send = {}) =>
  client.send('POST', '/files', { ...more, headers: { ...tus, 'upload-length': String(length), 'upload-metadata': metadataOf(fileId), ...more.headers } })
export const headUpload = (client: Client, url: string) => client.send('HEAD', url, { headers: tus })
export const patchUpload = (client: Client, url: string, offset: number, bytes: Buffer) =>
  client.send('PATCH', url, { raw: bytes, headers: { ...tus, 'content-type': 'application/offset+octet-stream', 'upload-offset': String(offset) } })

/** Fails with the server's words where an answer is not the expected one. */
export function must<T>(answer: Answer<T>, status: number): Answer<T> {
  if (answer.status !== status) throw new Error(`${answer.status} instead of ${status}: ${answer.text.slice(0, 500)}`)
  return answer
}

export async function announceRun(client: Client, body: AnnounceBody): Promise<RunDetail> {
  return must(await client.send<RunDetail>('POST', '/api/runs', { body }), 201).body
}

export async function beginUpload(client: Client, file: RunFile): Promise<string> {
  return String(must(await createUpload(client, file.id, file.sizeBytes), 201).headers.location)
}

/** Uploads one announced file from where it is. */
export async function bringFile(client: Client, file: RunFile, bytes: Buffer): Promise<string> {
  const url = file.uploadUrl ?? await beginUpload(client, file)
  const offset = Number(must(await headUpload(client, url), 200).headers['upload-offset'])
  if (offset < bytes.length) must(await patchUpload(client, url, offset, bytes.subarray(offset)), 204)
  return url
}

export const bytesOf = (files: SampleFile[], file: { role: string, sha256: string }) => files.find(one => one.role === file.role && sha256(one.bytes) === file.sha256)!.bytes
export const fileOf = (run: RunDetail, role: string) => run.files.find(file => file.role === role)!

/** Announces, uploads what is missing and files: all steps, from wherever they stand. */
export async function fileSample(client: Client, body: AnnounceBody, files: SampleFile[]): Promise<RunDetail> {
  const run = await announceRun(client, body)
  for (const file of run.files) if (file.state !== 'received') await bringFile(client, file, bytesOf(files, file))
  return must(await client.send<RunDetail>('POST', `/api/runs/${run.id}/file`), 200).body
}

export async function filedRun(client: Client, more: Partial<AnnounceBody> = {}): Promise<RunDetail> {
  const files = sampleFiles()
  return fileSample(client, announcement(await sampleResult(), files, more), files)
}
