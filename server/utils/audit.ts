/** What was done by whom; written in the transaction of the deed. */
import type { Db } from './db'
import { newId } from './tokens'

export interface Deed {
  clubId: string | null
  userId: string | null
  /** Name as shown; kept as it was then. */
  actor: string
  action: string
  kind: string
  id: string
  detail?: string
}

export async function audit(db: Db, { clubId, userId, actor, action, kind, id, detail = '' }: Deed): Promise<void> {
  await db('audit_events').insert({ id: newId(), club_id: clubId, user_id: userId, actor, action, subject_kind: kind, subject_id: id, detail: detail.slice(0, 500), at: new Date() })
}
