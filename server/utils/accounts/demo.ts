/** The people of the demo, or of an empty club its first organiser's invitation. Invented names only. */
import type { Role } from '../../../shared/api/account'
import { demoClub, demoPeople } from '../../../shared/demo'
import type { Db } from '../db'
import { newId } from '../tokens'
import { createInvitation } from './club'
import { addMember } from './people'

const DEFAULT_QUOTA_BYTES = 100 * 2 ** 30

/** Makes the first club of an empty database, once. */
export async function prepareDemo(db: Db): Promise<void> {
  if (await db('clubs').first('id')) return
  const clubId = newId()
  const demo = process.env.LULL_DEMO === '1'
  const name = demo ? demoClub : process.env.LULL_CLUB || 'Our club'
  const hashes = demo ? await Promise.all(demoPeople.map(person => hashPassword(person.password))) : []
  await db.transaction(async (trx) => {
    await trx('clubs').insert({ id: clubId, name, quota_bytes: DEFAULT_QUOTA_BYTES, created_at: new Date() })
    for (const [i, person] of (demo ? demoPeople : []).entries()) {
      await addMember(trx, { id: newId(), clubId, email: person.email, name: person.name, role: person.role as Role, passwordHash: hashes[i]! })
    }
  })
  if (!demo) {
    const email = process.env.LULL_ORGANISER || 'organiser@localhost'
    const { url } = await createInvitation(db, { clubId, clubName: name, email, role: 'organiser', by: { id: null, name: 'Lull' } })
    console.log(`The club is empty. Its first organiser (${email}) registers at ${url}`)
  }
}
