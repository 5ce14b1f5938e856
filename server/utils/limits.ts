/**
 * Rate limits, counted in the database so that they hold for all processes. Keys name the account and the address
 * together, so that a stranger cannot lock out an owner.
 */
import type { H3Event } from 'h3'
import { setResponseHeader } from 'h3'
import { RateLimiterMySQL, RateLimiterRes } from 'rate-limiter-flexible'
import { useDb } from './db'
import { problem, texts } from './errors'
import { hashToken } from './tokens'

const MINUTE = 60

/** points in duration (seconds). */
const rules = {
  'sign-in': { points: 8, duration: 15 * MINUTE },
  'sign-in-address': { points: 60, duration: 15 * MINUTE },
  'token': { points: 40, duration: 15 * MINUTE },
  'forgot': { points: 5, duration: 60 * MINUTE },
  'guest-remark': { points: 30, duration: 60 * MINUTE },
} as const
export type LimitName = keyof typeof rules

const limiters = new Map<LimitName, RateLimiterMySQL>()

function limiterOf(name: LimitName): RateLimiterMySQL {
  let limiter = limiters.get(name)
  if (!limiter) {
    const db = useDb()
    const dbName = new URL(useRuntimeConfig().databaseUrl).pathname.slice(1)
    limiter = new RateLimiterMySQL({ storeClient: db, storeType: 'knex', dbName, tableName: 'rate_limits', tableCreated: true, keyPrefix: name, ...rules[name] })
    limiters.set(name, limiter)
  }
  return limiter
}

/** The peer's address. X-Forwarded-For is believed only behind a proxy that the operator names. */
export function clientAddress(event: H3Event): string {
  const peer = event.node.req.socket.remoteAddress ?? 'unknown'
  if (process.env.LULL_TRUST_PROXY !== '1') return peer
  const forwarded = String(event.node.req.headers['x-forwarded-for'] ?? '').split(',').at(-1)?.trim()
  return forwarded || peer
}

/** Counts one attempt; throws 429 with Retry-After when there were too many. Long or odd keys are hashed. */
export async function countAttempt(event: H3Event, name: LimitName, key: string): Promise<void> {
  try {
    await limiterOf(name).consume(hashToken(key))
  }
  catch (refused) {
    if (!(refused instanceof RateLimiterRes)) throw refused
    const seconds = Math.max(1, Math.ceil(refused.msBeforeNext / 1000))
    setResponseHeader(event, 'Retry-After', seconds)
    throw problem(429, 'too-many', texts.tooMany, { retryAfterSeconds: seconds })
  }
}

/** Forgets the attempts of a key, after a success. */
export async function clearAttempts(name: LimitName, key: string): Promise<void> {
  await limiterOf(name).delete(hashToken(key))
}

/** Gives back one counted attempt, after a success, where others may share the key. */
export async function giveBackAttempt(name: LimitName, key: string): Promise<void> {
  await limiterOf(name).reward(hashToken(key))
}
