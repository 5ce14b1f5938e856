/** Content security policy of every page: only our own scripts, named by a nonce; nothing from elsewhere. */
import { randomBytes } from 'node:crypto'

export default defineNitroPlugin((nitro) => {
  if (import.meta.dev) return
  nitro.hooks.hook('render:html', (html, { event }) => {
    const nonce = randomBytes(16).toString('base64')
    event.context.nonce = nonce
    const mark = (part: string) => part.replaceAll(/<script(?=[\s>])(?![^>]*\snonce=)/g, `<script nonce="${nonce}"`)
    // Only what the framework itself adds; what a page shows of its users is in html.body and gets no nonce.
    html.head = html.head.map(mark)
    html.bodyPrepend = html.bodyPrepend.map(mark)
    html.bodyAppend = html.bodyAppend.map(mark)
  })
  nitro.hooks.hook('render:response', (response, { event }) => {
    response.headers ??= {}
    response.headers['content-security-policy'] = [
      'default-src \'self\'', `script-src 'self' 'nonce-${event.context.nonce ?? ''}' 'wasm-unsafe-eval'`, 'worker-src \'self\'',
      'style-src \'self\' \'unsafe-inline\'', 'img-src \'self\' data: blob:', 'font-src \'self\'', 'connect-src \'self\'',
      'object-src \'none\'', 'base-uri \'none\'', 'form-action \'self\'', 'frame-ancestors \'none\'',
    ].join('; ')
  })
})
