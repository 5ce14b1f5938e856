/** The people of the demo, or of an empty club its first organiser's invitation. Invented names only. */
import { writeFile } from 'node:fs/promises'
import { demoClub, demoPeople } from '../../../shared/demo'
import type { Db } from '../db'
import { firstInvitationFile } from '../folders'
import { newId } from '../tokens'
import { createInvitation } from './club'
import { addMember } from './people'

const DEFAULT_QUOTA_BYTES = 100 * 2 ** 30

/** Makes the first club of an empty database, once. */
export async function prepareFirstClub(db: Db): Promise<void> {
  if (await db('clubs').first('id')) return
  await (process.env.LULL_DEMO === '1' ? makeDemoClub(db) : makeEmptyClub(db))
}

async function makeDemoClub(db: Db): Promise<void> {
  const people = await Promise.all(demoPeople.map(async ({ password, ...person }) => ({ ...person, id: newId(), passwordHash: await hashPassword(password) })))
  const clubId = newId()
  await db.transaction(async (trx) => {
    await trx('clubs').insert({ id: clubId, name: demoClub, quota_bytes: DEFAULT_QUOTA_BYTES, created_at: new Date() })
    for (const person of people) await addMember(trx, { ...person, clubId })
  })
}

/** The link is kept in a file for the operator, which only they can read; it is removed when the invitation was used. */
async function makeEmptyClub(db: Db): Promise<void> {
  const clubId = newId()
  const clubName = process.env.LULL_CLUB || 'Our club'
  const email = process.env.LULL_ORGANISER || 'organiser@localhost.example'
  await db.transaction(async (trx) => {
    await trx('clubs').insert({ id: clubId, name: clubName, quota_bytes: DEFAULT_QUOTA_BYTES, created_at: new Date() })
    const { url } = await createInvitation(trx, { clubId, clubName, email, role: 'organiser', by: { id: null, name: 'Lull' } })
    await writeFile(firstInvitationFile(), `The club is empty. Its first organiser (${email}) registers within two weeks at\n  ${url}\n`, { mode: 0o600 })
  })
}
