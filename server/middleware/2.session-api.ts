/**
 * The session module brings an API of its own that reads and clears the cookie. Lull's sessions are rows, with their
 * own routes; a second way in and out would end cookies and leave rows, so it answers as a missing thing does.
 */
import { defineEventHandler } from 'h3'
import { notFound } from '../utils/errors'

export default defineEventHandler((event) => {
  if (/^\/api\/_auth(?:[/?]|$)/.test(event.path)) throw notFound()
})
