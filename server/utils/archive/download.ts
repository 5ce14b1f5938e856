/** Serving a stored file: ranges, validators, the right name (RFC 9110, sections 13 and 14). */
import { createReadStream } from 'node:fs'
import type { H3Event } from 'h3'
import { getHeader, sendStream, setResponseHeaders, setResponseStatus } from 'h3'
import { problem } from '../errors'
import type { FileRow } from './receive'
import { sizeOf, storedPath } from './store'
import { attachment } from './types'

/** One byte range [start, end] of a Range header; null to serve the whole, "unsatisfiable" for 416. Several ranges are served whole. */
export function parseRange(header: string | undefined, size: number): { start: number, end: number } | 'unsatisfiable' | null {
  const match = /^bytes=(\d*)-(\d*)$/.exec(header ?? '')
  if (!match || (match[1] === '' && match[2] === '')) return null
  if (match[1] === '') {
    const length = Number(match[2])
    return length === 0 ? 'unsatisfiable' : { start: Math.max(0, size - length), end: size - 1 }
  }
  const start = Number(match[1])
  const end = match[2] === '' ? size - 1 : Math.min(size - 1, Number(match[2]))
  if (start >= size) return 'unsatisfiable'
  return end < start ? null : { start, end }
}

/** Whether one of the validators of an If-None-Match header is this one (RFC 9110, 13.1.2: weak comparison, lists and `*`). */
export function matchesAny(header: string | undefined, etag: string): boolean {
  if (header === undefined) return false
  return header.trim() === '*' || header.split(',').some(one => one.trim().replace(/^W\//, '') === etag)
}

/** For a guest nothing may stay in a cache: a withdrawn link takes everything along. */
export async function sendFile(event: H3Event, file: FileRow, { guest = false } = {}) {
  const path = storedPath(file.sha256)
  const size = await sizeOf(path)
  if (size !== Number(file.size_bytes)) throw problem(503, 'store', 'The archive cannot find this file at the moment. Your organiser should look at the store and its backup.')
  const etag = `"${file.sha256}"`
  setResponseHeaders(event, {
    'Content-Type': file.type, 'ETag': etag, 'Accept-Ranges': 'bytes', 'X-Content-Type-Options': 'nosniff',
    'Content-Disposition': file.role === 'preview' || file.role === 'thumbnail' || file.role === 'proofs' ? attachment(file.name).replace('attachment', 'inline') : attachment(file.name),
    // The content of an id never changes, but who may see it does: kept by the browser, asked again each time.
    'Cache-Control': guest ? 'no-store' : 'private, no-cache', 'Content-Security-Policy': 'default-src \'none\'; sandbox',
  })
  if (matchesAny(getHeader(event, 'if-none-match'), etag)) {
    setResponseStatus(event, 304)
    return null
  }
  const ifRange = getHeader(event, 'if-range')
  const range = ifRange && ifRange !== etag ? null : parseRange(getHeader(event, 'range'), size)
  if (range === 'unsatisfiable') {
    setResponseHeaders(event, { 'Content-Range': `bytes */${size}` })
    throw problem(416, 'range', 'The range lies outside of the file.')
  }
  const { start, end } = range ?? { start: 0, end: size - 1 }
  setResponseHeaders(event, { 'Content-Length': end - start + 1, ...(range ? { 'Content-Range': `bytes ${start}-${end}/${size}` } : {}) })
  if (range) setResponseStatus(event, 206)
  if (event.method === 'HEAD') return ''
  return sendStream(event, createReadStream(path, { start, end }))
}
