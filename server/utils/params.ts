/** Parameters of routes. A malformed id answers like a missing thing. */
import type { H3Event } from 'h3'
import { getRouterParam } from 'h3'
import { z } from 'zod'
import { idSchema } from '../../shared/api/account'
import { notFound } from './errors'

export const pageQuery = z.object({ page: z.coerce.number().int().min(1).max(100_000).default(1) })

export function idParam(event: H3Event, name: string): string {
  const parsed = idSchema.safeParse(getRouterParam(event, name))
  if (!parsed.success) throw notFound()
  return parsed.data
}
