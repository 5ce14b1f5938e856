/** The one connection pool of this process. */
import createKnex, { type Knex } from 'knex'

let pool: Knex | null = null

/** Settings that keep numbers, times and texts as they are (see TRAPS of the driver in DEVELOPERS.md). */
export function openDatabase(url: string): Knex {
  return createKnex({
    client: 'mysql2',
    connection: { uri: url, charset: 'utf8mb4', timezone: 'Z', supportBigNumbers: true, decimalNumbers: true, jsonStrings: true } as Knex.MySql2ConnectionConfig,
    pool: {
      min: 0, max: 10,
      afterCreate(connection: { query(sql: string, done: (error: Error | null) => void): void }, done: (error: Error | null, connection: unknown) => void) {
        connection.query('set time_zone = \'+00:00\'', error => done(error, connection))
      },
    },
    acquireConnectionTimeout: 5000,
  })
}

export function useDb(): Knex {
  if (!pool) {
    const url = useRuntimeConfig().databaseUrl
    if (!url) throw new Error('NUXT_DATABASE_URL is not set; the start command sets it.')
    pool = openDatabase(url)
  }
  return pool
}

export async function closeDb(): Promise<void> {
  await pool?.destroy()
  pool = null
}

/** A database handle or a transaction. */
export type Db = Knex | Knex.Transaction
