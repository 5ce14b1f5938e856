/**
 * Seeds the demo into a running server: real simulation, the real core, the real API. The start command runs it each
 * time; it ends at once where the demo is complete. It can be killed at any moment, and then makes what is missing.
 *
 *   LULL_BASE_URL=http://127.0.0.1:3000 NUXT_DATABASE_URL=mysql://… tsx scripts/seed/index.ts
 *
 * LULL_SEED_SHARE=0.1 simulates a tenth of each capture, for tests.
 */
import { hasDemoClub, isSeeded, markSeeded, openDatabase } from './marker'
import { seed } from './seed'

async function main(): Promise<void> {
  const base = process.env.LULL_BASE_URL
  const database = process.env.NUXT_DATABASE_URL
  if (!base || !database) throw new Error('LULL_BASE_URL and NUXT_DATABASE_URL must say where the server and its database are.')
  const db = openDatabase(database)
  try {
    if (await isSeeded(db)) return
    if (!await hasDemoClub(db)) {
      console.log('This database belongs to a club of its own; the demo is left out.')
      return
    }
    await seed(base, { share: Number(process.env.LULL_SEED_SHARE ?? 1) })
    await markSeeded(db)
  }
  finally {
    await db.destroy()
  }
}

try {
  await main()
}
catch (reason) {
  console.error(`\nThe demo is not complete: ${(reason as Error).message}\nStart Lull again: the seeding goes on with what is missing.`)
  process.exitCode = 1
}
