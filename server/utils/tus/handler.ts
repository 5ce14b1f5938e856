/**
 * The door of the uploads: who asks, for which file, in words of the protocol; then the tus server does the rest.
 * Foreign uploads and missing ones answer the same 404. Nothing can be read back here: files of runs are served
 * by the runs' own routes.
 */
import { defineEventHandler, getHeader, setResponseHeader, setResponseStatus, type H3Event } from 'h3'
import { idSchema } from '../../../shared/api/account'
import { useDb } from '../db'
import { asProblem } from '../errors'
import { currentActor } from '../session'
import { MAX_UPLOAD_BYTES, parseMetadata, useTus } from './server'

const VERSION = '1.0.0'

function refuse(event: H3Event, status: number, text: string) {
  setResponseHeader(event, 'Tus-Resumable', VERSION)
  setResponseHeader(event, 'Cache-Control', 'no-store')
  setResponseHeader(event, 'Content-Type', 'text/plain; charset=utf-8')
  setResponseStatus(event, status)
  return `${text}\n`
}

export const uploadHandler = defineEventHandler(async (event) => {
  try {
    const method = getHeader(event, 'x-http-method-override')?.toUpperCase() ?? event.method
    if (method !== event.method) return refuse(event, 400, 'Methods cannot be overridden here.')
    if (method === 'OPTIONS') return await pass(event)
    if (!['POST', 'HEAD', 'PATCH', 'DELETE'].includes(method)) return refuse(event, 405, 'Uploads can be written here, not read.')
    const actor = await currentActor(event)
    if (!actor) return refuse(event, 401, 'Sign in first.')
    const version = getHeader(event, 'tus-resumable')
    if (version !== VERSION) {
      setResponseHeader(event, 'Tus-Version', VERSION)
      return refuse(event, 412, `This server speaks tus ${VERSION}.`)
    }
    const uploadId = event.path.split('?')[0]!.replace(/^\/files\/?/, '')
    const refusal = method === 'POST' ? await mayCreate(event, actor.id, uploadId) : await mayTouch(event, actor.id, uploadId, method)
    return refusal ?? await pass(event)
  }
  catch (error) {
    throw asProblem(error)
  }
})

async function pass(event: H3Event) {
  setResponseHeader(event, 'Cache-Control', 'no-store')
  await useTus().handle(event.node.req, event.node.res)
  return undefined
}

async function mayCreate(event: H3Event, userId: string, uploadId: string): Promise<string | null> {
  if (uploadId !== '') return refuse(event, 404, 'Not found')
  const metadata = parseMetadata(getHeader(event, 'upload-metadata'))
  const stated = getHeader(event, 'upload-length') ?? ''
  const length = /^\d{1,15}$/.test(stated) ? Number(stated) : 0
  if (!metadata) return refuse(event, 400, 'The Upload-Metadata header cannot be read.')
  if (length < 1) return refuse(event, 400, 'Upload-Length must be a positive number.')
  if (length > MAX_UPLOAD_BYTES) return refuse(event, 413, 'The file is too large.')
  const fileId = idSchema.safeParse(metadata.fileId)
  const file = fileId.success && await useDb()('run_files as f').join('runs as r', 'r.id', 'f.run_id').where({ 'f.id': fileId.data, 'r.owner_id': userId, 'r.state': 'announced' }).first('f.size_bytes', 'f.state')
  if (!file) return refuse(event, 404, 'Not found')
  if (file.state === 'received') return refuse(event, 409, 'This file is in the archive already.')
  if (Number(file.size_bytes) !== length) return refuse(event, 400, `The file was announced with ${file.size_bytes} bytes, not ${length}.`)
  return null
}

async function mayTouch(event: H3Event, userId: string, uploadId: string, method: string): Promise<string | null> {
  const file = /^[A-Za-z0-9_-]{16,64}$/.test(uploadId)
    ? await useDb()('run_files as f').join('runs as r', 'r.id', 'f.run_id').where({ 'f.upload_id': uploadId, 'r.owner_id': userId, 'r.state': 'announced' }).first('f.state', 'f.size_bytes')
    : undefined
  if (!file) return refuse(event, 404, 'Not found')
  if (method === 'PATCH' && getHeader(event, 'content-type') !== 'application/offset+octet-stream') return refuse(event, 415, 'A PATCH carries application/offset+octet-stream.')
  return file.state === 'received' ? ofFinished(event, method, String(file.size_bytes)) : null
}

/** A finished upload has left the tus server's folder; a client that missed the last answer is still told that it is complete. */
function ofFinished(event: H3Event, method: string, size: string): string {
  if (method === 'DELETE') return refuse(event, 403, 'This file is in the archive already; delete its run instead.')
  if (method === 'PATCH' && getHeader(event, 'upload-offset') !== size) return refuse(event, 409, 'This upload is complete already.')
  const text = refuse(event, method === 'HEAD' ? 200 : 204, '')
  setResponseHeader(event, 'Upload-Offset', size)
  if (method === 'HEAD') setResponseHeader(event, 'Upload-Length', size)
  return text.trim()
}
