/** Brings the database to today's tables. Of several processes that start together one does it, the others wait. */
import type { Knex } from 'knex'
import { migrationSource } from '../../migrations'

let done = false
export const isMigrated = () => done

export async function migrate(db: Knex): Promise<void> {
  // The lock belongs to one connection; the migrator works on others of the pool.
  const connection = await db.client.acquireConnection()
  try {
    await db.raw('select get_lock(?, 120)', ['lull.migrate']).connection(connection)
    // A migrator that was killed leaves its own lock behind; ours has just proven that nobody migrates.
    await db.migrate.forceFreeMigrationsLock({ migrationSource })
    await db.migrate.latest({ migrationSource })
    done = true
  }
  finally {
    await db.raw('select release_lock(?)', ['lull.migrate']).connection(connection)
    await db.client.releaseConnection(connection)
  }
}
