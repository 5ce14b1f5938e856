/**
 * Refuses what another site makes a browser send: everything that is not a read must come from our own origin
 * (Fetch metadata, and Origin where a browser sends none). Programs that are no browser send neither header.
 */
import { defineEventHandler, getHeader } from 'h3'
import { problem, texts } from '../utils/errors'

export default defineEventHandler((event) => {
  if (event.method === 'GET' || event.method === 'HEAD' || event.method === 'OPTIONS') return
  const site = getHeader(event, 'sec-fetch-site')
  const origin = getHeader(event, 'origin')
  const foreign = (site !== undefined && site !== 'same-origin' && site !== 'none') || (origin !== undefined && hostOf(origin) !== getHeader(event, 'host'))
  if (foreign) throw problem(403, 'cross-site', texts.crossSite)
})

function hostOf(origin: string): string | null {
  try {
    return new URL(origin).host
  }
  catch {
    return null
  }
}
