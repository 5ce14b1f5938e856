/** A small SMTP server on loopback for the demo and for tests: takes every mail and keeps it as a file. */
import { mkdir, writeFile } from 'node:fs/promises'
import type { AddressInfo } from 'node:net'
import path from 'node:path'
import { SMTPServer } from 'smtp-server'
import { mailFolder } from './folders'
import { useSmtpServer } from './mail'
import { newId } from './tokens'

const MAX_MAIL_BYTES = 1024 * 1024

/** Starts it when NUXT_SMTP_URL is "local", and sends the mail there. */
export async function startLocalSmtp(): Promise<(() => Promise<void>) | undefined> {
  if (useRuntimeConfig().smtpUrl !== 'local') return undefined
  const server = new SMTPServer({
    authOptional: true, disabledCommands: ['STARTTLS', 'AUTH'], size: MAX_MAIL_BYTES,
    onData(stream, _session, done) {
      const parts: Buffer[] = []
      stream.on('data', (part: Buffer) => parts.push(part))
      stream.on('end', () => {
        if (stream.sizeExceeded) return done(new Error('The mail is too large.'))
        mkdir(mailFolder(), { recursive: true })
          .then(() => writeFile(path.join(mailFolder(), `${Date.now()}-${newId()}.eml`), Buffer.concat(parts), { mode: 0o600 }))
          .then(() => done(), done)
      })
    },
  })
  await new Promise<void>((resolve, reject) => {
    server.once('error', reject)
    server.listen(0, '127.0.0.1', resolve)
  })
  const { port } = server.server.address() as AddressInfo
  useSmtpServer(`smtp://127.0.0.1:${port}`)
  return () => new Promise(resolve => server.close(resolve))
}
