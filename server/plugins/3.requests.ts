/** One log line for each request of the API and of uploads, without tokens; an id by which user and operator mean the same one. */
import { randomBytes } from 'node:crypto'
import { getResponseStatus, setResponseHeader } from 'h3'
import { withoutTokens } from '../utils/request-log'

export default defineNitroPlugin((nitro) => {
  nitro.hooks.hook('request', (event) => {
    // Calls that a page makes while it is rendered come without a socket; they belong to the page's request.
    if (!event.node.req.socket.remoteAddress) return
    event.context.requestId = randomBytes(6).toString('base64url')
    event.context.startedAt = performance.now()
    setResponseHeader(event, 'X-Request-Id', event.context.requestId)
    if (event.path.startsWith('/api/')) setResponseHeader(event, 'Cache-Control', 'no-store')
  })
  nitro.hooks.hook('afterResponse', (event) => {
    const { requestId, startedAt, actor } = event.context
    if (!requestId || import.meta.dev || !/^\/(?:api|files)(?:[/?]|$)/.test(event.path) || event.path.startsWith('/api/health')) return
    console.log(`${new Date().toISOString()} ${requestId} ${event.method} ${withoutTokens(event.path)} ${getResponseStatus(event)} ${Math.round(performance.now() - startedAt)} ms ${actor?.id ?? '-'}`)
  })
})
