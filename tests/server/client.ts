/** One visitor as the server sees it: a cookie of its own, JSON in and out, from a chosen address of loopback. */
import { request } from 'node:http'
import { inject } from 'vitest'

export interface Answer<T = unknown> { status: number, headers: Record<string, string | string[] | undefined>, text: string, body: T }
export interface Send { body?: unknown, headers?: Record<string, string>, localAddress?: string, raw?: Buffer }

/** The server that this file's tests talk to: the one that all share, unless the file started its own. */
let own: { url: string, databaseUrl: string, folder: string, log: string } | null = null
export const currentServer = () => own ?? inject('lull')
export function useOwnServer(server: NonNullable<typeof own>): void {
  own = server
}

export class Client {
  cookie = ''

  constructor(readonly base = currentServer().url) {}

  /** Never throws for a status; the cookie is kept as a browser would. */
  send<T = unknown>(method: string, path: string, { body, headers = {}, localAddress, raw }: Send = {}): Promise<Answer<T>> {
    const bytes = raw ?? (body === undefined ? undefined : Buffer.from(JSON.stringify(body)))
    const all: Record<string, string> = { ...(this.cookie ? { cookie: this.cookie } : {}), ...(body === undefined ? {} : { 'content-type': 'application/json' }), ...headers }
    if (bytes) all['content-length'] = String(bytes.length)
    return new Promise((resolve, reject) => {
      const outgoing = request(this.base + path, { method, headers: all, localAddress, agent: false }, (incoming) => {
        const parts: Buffer[] = []
        incoming.on('data', (part: Buffer) => parts.push(part))
        incoming.on('error', reject)
        incoming.on('end', () => {
          const text = Buffer.concat(parts).toString('utf8')
          this.#keep(incoming.headers['set-cookie'])
          resolve({ status: incoming.statusCode!, headers: incoming.headers, text, body: parsed(text) as T })
        })
      })
      outgoing.on('error', reject)
      outgoing.end(bytes)
    })
  }

  #keep(lines: string[] | undefined): void {
    for (const line of lines ?? []) {
      const pair = line.split(';')[0]!
      this.cookie = pair.endsWith('=') ? '' : pair
    }
  }

  /** The same visitor with the cookie copied: what one does, the other does not learn. */
  copy(): Client {
    const twin = new Client(this.base)
    twin.cookie = this.cookie
    return twin
  }

  static async signedIn(email: string, password: string): Promise<Client> {
    const client = new Client()
    const answer = await client.send('POST', '/api/auth/sign-in', { body: { email, password } })
    if (answer.status !== 200) throw new Error(`Signing in as ${email} answered ${answer.status}: ${answer.text}`)
    return client
  }
}

function parsed(text: string): unknown {
  try {
    return JSON.parse(text)
  }
  catch {
    return null
  }
}
