/**
 * Mail: queued as a row in the transaction of the deed, sent after it through the SMTP server of the environment.
 * What could not be sent stays queued and is tried again.
 */
import type { Transporter } from 'nodemailer'
import nodemailer from 'nodemailer'
import type { Db } from './db'
import { useDb } from './db'
import { newId } from './tokens'

export interface Letter { clubId: string | null, to: string, subject: string, text: string }

/** Queues a mail; call deliverMails() when the transaction is through. */
export async function queueMail(db: Db, { clubId, to, subject, text }: Letter): Promise<void> {
  await db('mails').insert({ id: newId(), club_id: clubId, recipient: to, subject: subject.slice(0, 250), body: text, state: 'queued', created_at: new Date() })
}

let transport: Transporter | null = null
let delivering = false
let smtpServer: string | null = null

/** Names the SMTP server in place of the configured one (the local server's port is known only once it runs). */
export function useSmtpServer(url: string): void {
  smtpServer = url
}

/** Links in mails open accounts: once sent they are kept readable only in the demo, where nobody is harmed. */
function keptBody(body: string): string {
  if (process.env.LULL_DEMO === '1') return body
  return body.replaceAll(/(token=|\/s\/)[A-Za-z0-9_-]{16,}/g, '$1…')
}

/** Sends what is queued, oldest first. Never throws: a mail that fails is marked and stays readable. */
export async function deliverMails(): Promise<void> {
  const { smtpUrl, mailFrom } = useRuntimeConfig()
  const url = smtpServer ?? smtpUrl
  if (delivering || !url || url === 'local') return
  delivering = true
  try {
    transport ??= nodemailer.createTransport(url)
    const db = useDb()
    const rows = await db('mails').where({ state: 'queued' }).orderBy('created_at').limit(50)
    for (const row of rows) {
      try {
        await transport.sendMail({ from: mailFrom, to: row.recipient, subject: row.subject, text: row.body })
        await db('mails').where({ id: row.id }).update({ state: 'sent', sent_at: new Date(), error: null, body: keptBody(row.body) })
      }
      catch (error) {
        const old = Date.now() - new Date(row.created_at).getTime() > 2 * 86_400_000
        await db('mails').where({ id: row.id }).update({ error: String((error as Error).message).slice(0, 500), ...(old ? { state: 'failed' } : {}) })
      }
    }
  }
  catch (error) {
    console.error('Mail could not be delivered:', (error as Error).message)
  }
  finally {
    delivering = false
  }
}

/** The address under which people reach this server, for links in mails. */
export function publicUrl(): string {
  const configured = useRuntimeConfig().publicUrl
  if (configured) return configured.replace(/\/$/, '')
  return `http://${process.env.HOST || '127.0.0.1'}:${process.env.PORT || '3000'}`
}
