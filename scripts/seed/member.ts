/** One signed-in member, as a browser would be: a cookie, JSON in and out, and resumable uploads. */

export class SeedError extends Error {
  override name = 'SeedError'
}

export class Member {
  readonly #base: string
  #cookie = ''
  readonly email: string
  id = ''

  private constructor(base: string, email: string) {
    this.#base = base.replace(/\/$/, '')
    this.email = email
  }

  static async signIn(base: string, email: string, password: string): Promise<Member> {
    const member = new Member(base, email)
    const me = await member.call<{ id: string }>('POST', '/api/auth/sign-in', { email, password })
    member.id = me.id
    return member
  }

  /** Answers the parsed body; throws with the server's own words. */
  async call<T = unknown>(method: string, path: string, body?: unknown): Promise<T> {
    const response = await this.#send(method, path, body === undefined ? {} : { 'content-type': 'application/json' }, body === undefined ? undefined : JSON.stringify(body))
    const text = await response.text()
    if (!response.ok) throw new SeedError(`${method} ${path} answered ${response.status}: ${messageOf(text)}`)
    return (text === '' ? undefined : JSON.parse(text)) as T
  }

  /** Uploads the bytes of one announced file by tus 1.0, in one piece. */
  async upload(fileId: string, bytes: Uint8Array): Promise<void> {
    const created = await this.#send('POST', '/files', {
      'tus-resumable': '1.0.0', 'upload-length': String(bytes.length), 'upload-metadata': `fileId ${Buffer.from(fileId).toString('base64')}`,
    })
    const place = created.headers.get('location')
    if (created.status !== 201 || !place) throw new SeedError(`The upload of ${fileId} was not accepted: ${created.status} ${messageOf(await created.text())}`)
    const sent = await this.#send('PATCH', new URL(place, `${this.#base}/files/`).pathname, {
      'tus-resumable': '1.0.0', 'upload-offset': '0', 'content-type': 'application/offset+octet-stream',
    }, bytes as Uint8Array<ArrayBuffer>)
    if (sent.status !== 204) throw new SeedError(`The upload of ${fileId} stopped: ${sent.status} ${messageOf(await sent.text())}`)
  }

  async #send(method: string, path: string, headers: Record<string, string>, body?: BodyInit): Promise<Response> {
    const response = await fetch(this.#base + path, { method, headers: { ...headers, cookie: this.#cookie, origin: new URL(this.#base).origin }, body, redirect: 'manual' })
    for (const line of response.headers.getSetCookie()) this.#cookie = line.split(';')[0]!
    return response
  }
}

function messageOf(text: string): string {
  try {
    return (JSON.parse(text) as { message?: string }).message ?? text
  }
  catch {
    return text.slice(0, 300)
  }
}
