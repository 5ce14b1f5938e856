/** One way for every error to become an answer: a status, a code, and a sentence for the user. */
import type { H3Error } from 'h3'
import { createError, isError } from 'h3'
import { ZodError } from 'zod'

export const texts = {
  notFound: 'There is nothing here, or it is not yours to see.',
  signInFirst: 'Sign in first.',
  notAllowed: 'Your role in the club does not allow this.',
  wrongSignIn: 'This e-mail address and password do not belong together.',
  tooMany: 'Too many attempts. Wait a little and try again.',
  crossSite: 'This request came from another site and was refused.',
  badInvitation: 'This invitation is not valid any more: it was used, withdrawn or has expired. Ask your organiser for a new one.',
  badReset: 'This link is not valid any more: it was used or has expired. Ask for a new one.',
  emailTaken: 'There is an account with this e-mail address already. Sign in, or ask for a new password.',
  wrongPassword: 'The current password is not right.',
  lastOrganiser: 'A club needs an organiser: make somebody else organiser first.',
  tooLarge: 'The request is too large.',
  unwell: 'The database does not answer at the moment. Nothing was changed; try again in a minute.',
  server: 'Something went wrong on the server. Nothing was changed; try again in a moment.',
} as const

/** An answer that refuses, with a message for the user. */
export function problem(statusCode: number, code: string, message: string, data: Record<string, unknown> = {}): H3Error {
  return createError({ statusCode, message, data: { code, ...data } })
}

export const notFound = () => problem(404, 'not-found', texts.notFound)

/** Turns whatever was thrown into such an answer; what nobody foresaw is logged and told without details. */
export function asProblem(error: unknown): H3Error {
  if (error instanceof ZodError) {
    const issue = error.issues[0]
    const field = issue?.path.join('.') ?? ''
    return problem(400, 'invalid', `${field ? `${field}: ` : ''}${issue?.message ?? 'not valid'}`, { field })
  }
  if (isError(error) && !error.unhandled && error.statusCode < 500) return error
  if (isError(error) && error.statusCode === 503) return error
  if (isUnreachable(error)) {
    console.error('The database does not answer:', (error as Error).message)
    return problem(503, 'unwell', texts.unwell)
  }
  console.error(error)
  return problem(500, 'server', texts.server)
}

/** Errors of the driver and the pool that say that the database is away, and nothing about the request. */
function isUnreachable(error: unknown): boolean {
  const { name, code } = error as { name?: string, code?: string }
  return name === 'KnexTimeoutError' || ['ECONNREFUSED', 'ECONNRESET', 'EPIPE', 'ETIMEDOUT', 'PROTOCOL_CONNECTION_LOST', 'ER_SERVER_SHUTDOWN', 'ER_CON_COUNT_ERROR'].includes(code ?? '')
}
