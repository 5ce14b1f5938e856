/** The tus 1.0 server over a folder. Who may touch which upload is decided before it is asked, in handler.ts. */
import { mkdirSync } from 'node:fs'
import { FileStore } from '@tus/file-store'
import { EVENTS, Metadata, Server } from '@tus/server'
import { settleFile } from '../archive/receive'
import { useDb } from '../db'
import { uploadsFolder } from '../folders'
import { newId } from '../tokens'
import { uploadLocker } from './locker'

/** 64 GiB: twice the largest capture that the club's people bring. */
export const MAX_UPLOAD_BYTES = 64 * 2 ** 30

let server: Server | null = null

export function useTus(): Server {
  if (server) return server
  mkdirSync(uploadsFolder(), { recursive: true })
  server = new Server({
    path: '/files', datastore: new FileStore({ directory: uploadsFolder() }), maxSize: MAX_UPLOAD_BYTES, relativeLocation: true, respectForwardedHeaders: false,
    allowedOrigins: [], locker: uploadLocker, lockDrainTimeout: 3000, disableTerminationForFinishedUploads: true,
    namingFunction: () => newId(),
    async onUploadCreate(_request, upload) {
      const fileId = upload.metadata?.fileId ?? ''
      const changed = await useDb()('run_files').where({ id: fileId }).whereNot({ state: 'received' }).update({ upload_id: upload.id, state: 'announced', problem: null, received_at: null })
      if (changed !== 1) throw { status_code: 404, body: 'Not found\n' }
      return {}
    },
    async onUploadFinish(_request, upload) {
      const row = await useDb()('run_files').where({ upload_id: upload.id }).first('id')
      if (!row) throw { status_code: 404, body: 'Not found\n' }
      const state = await settleFile(row.id)
      if (state !== 'received') {
        const { problem } = await useDb()('run_files').where({ id: row.id }).first('problem')
        throw { status_code: 422, body: `${problem ?? 'The file was refused.'}\n` }
      }
      return {}
    },
    onResponseError(_request, error) {
      if ('status_code' in error) {
        // A lock that was not free in time is no fault of the server: "locked", to be tried again.
        if (error.status_code === 500) return { status_code: 423, body: 'This upload is being written by another connection. Try again in a moment.\n' }
        return undefined
      }
      console.error('Upload:', error.message)
      return { status_code: 500, body: 'The upload could not be written. What has arrived is kept; try again in a moment.\n' }
    },
  })
  server.on(EVENTS.POST_TERMINATE, (_request, _response, id) => {
    useDb()('run_files').where({ upload_id: id, state: 'announced' }).update({ upload_id: null }).catch(error => console.error('Upload:', error.message))
  })
  return server
}

/** Metadata of an Upload-Metadata header; null where it cannot be read. */
export function parseMetadata(header: string | undefined): Record<string, string | null> | null {
  try {
    return Metadata.parse(header) as Record<string, string | null>
  }
  catch {
    return null
  }
}
