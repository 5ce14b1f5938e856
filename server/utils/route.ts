/**
 * The one shape of a route: parse with Zod, check access, one call, answer.
 *
 *     export default defineRoute({ access: 'club.write', body: clubBody }, ({ actor, body }) => changeClub(actor, body))
 */
import type { EventHandler, H3Event } from 'h3'
import { defineEventHandler, getQuery, setResponseHeader } from 'h3'
import type { output, ZodType } from 'zod'
import type { ClubAction } from './access'
import { mayInClub } from './access'
import { asProblem, problem, texts } from './errors'
import type { Actor } from './session'
import { currentActor, requireActor } from './session'

type Access = 'anyone' | 'signed-in' | ClubAction

interface Options<A extends Access, B extends ZodType | undefined, Q extends ZodType | undefined> {
  /** `anyone`, `signed-in`, or an action on the club. Things are checked by the call itself, which knows them. */
  access: A
  body?: B
  query?: Q
}

interface Context<A extends Access, B, Q> {
  event: H3Event
  actor: A extends 'anyone' ? Actor | null : Actor
  body: B extends ZodType ? output<B> : undefined
  query: Q extends ZodType ? output<Q> : undefined
}

const MAX_BODY_BYTES = 4 * 1024 * 1024

export function defineRoute<A extends Access, B extends ZodType | undefined = undefined, Q extends ZodType | undefined = undefined, T = unknown>(
  options: Options<A, B, Q>,
  handle: (context: Context<A, B, Q>) => Promise<T> | T,
): EventHandler {
  return defineEventHandler(async (event) => {
    try {
      setResponseHeader(event, 'Cache-Control', 'no-store')
      const actor = options.access === 'anyone' ? await currentActor(event) : await requireActor(event)
      if (options.access !== 'anyone' && options.access !== 'signed-in' && !mayInClub(actor!, options.access as ClubAction)) throw problem(403, 'not-allowed', texts.notAllowed)
      const length = Number(event.node.req.headers['content-length'] ?? 0)
      if (length > MAX_BODY_BYTES) throw problem(413, 'too-large', texts.tooLarge)
      const body = options.body ? options.body.parse(await readJson(event)) : undefined
      const query = options.query ? options.query.parse(getQuery(event)) : undefined
      return await handle({ event, actor, body, query } as Context<A, B, Q>)
    }
    catch (error) {
      throw asProblem(error)
    }
  })
}

async function readJson(event: H3Event): Promise<unknown> {
  const text = await readText(event)
  if (text.trim() === '') return {}
  try {
    return JSON.parse(text) ?? {}
  }
  catch {
    throw problem(400, 'invalid', 'The request is not readable as JSON.')
  }
}

/** The body, stopped at the limit also where no length was announced (a chunked request). */
async function readText(event: H3Event): Promise<string> {
  const parts: Buffer[] = []
  let size = 0
  // The stream is not torn down when the loop is left: the refusal still has to reach the sender over its connection.
  for await (const part of event.node.req.iterator({ destroyOnReturn: false }) as AsyncIterable<Buffer>) {
    size += part.length
    if (size > MAX_BODY_BYTES) {
      setResponseHeader(event, 'Connection', 'close')
      throw problem(413, 'too-large', texts.tooLarge)
    }
    parts.push(part)
  }
  return Buffer.concat(parts).toString('utf8')
}
