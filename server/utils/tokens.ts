/** Ids and secrets. */
import { createHash, randomBytes } from 'node:crypto'

/** 128 random bits, base64url, 22 characters: cannot be guessed. */
export const newId = () => randomBytes(16).toString('base64url')

/** 256 random bits for links that open something by themselves. */
export const newToken = () => randomBytes(32).toString('base64url')

/** What is stored of a token. The token has full entropy, so a plain hash is enough. */
export const hashToken = (token: string) => createHash('sha256').update(token).digest('hex')
