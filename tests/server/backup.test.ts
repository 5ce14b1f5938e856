/** A backup of the filled test archive, restored into an empty Lull: every table and every file is the same. */
import { spawn } from 'node:child_process'
import { appendFile, mkdtemp, readdir, rm } from 'node:fs/promises'
import os from 'node:os'
import path from 'node:path'
import { afterAll, beforeAll, describe, expect, inject, it } from 'vitest'
import { filesIn, hashFile } from '../../scripts/lib/copies'
import { startDatabase } from '../../scripts/lib/mariadb.mjs'
import { root } from '../../scripts/lib/system.mjs'
import { openDatabase } from '../../server/utils/db'
import { makeRun } from './access/archive'
import { closeTestDb, makeWorld } from './world'

let place: string
beforeAll(async () => {
  place = await mkdtemp(path.join(os.tmpdir(), 'lull-backup-'))
  await makeRun(await makeWorld())
})
afterAll(async () => {
  await closeTestDb()
  await rm(place, { recursive: true, force: true })
})

function command(script: string, argument: string, dataDir: string): Promise<{ code: number | null, said: string }> {
  const child = spawn(process.execPath, [path.join(root, 'node_modules', 'tsx', 'dist', 'cli.mjs'), path.join(root, 'scripts', script), argument], { env: { ...process.env, LULL_DATA_DIR: dataDir }, cwd: root })
  const parts: Buffer[] = []
  child.stdout.on('data', part => parts.push(part))
  child.stderr.on('data', part => parts.push(part))
  return new Promise(resolve => child.once('close', code => resolve({ code, said: Buffer.concat(parts).toString('utf8') })))
}

/** A checksum of the rows of every table, as MariaDB counts it. */
async function checksums(url: string): Promise<Record<string, unknown>> {
  const db = openDatabase(url)
  try {
    const [tables] = await db.raw('select table_name as name from information_schema.tables where table_schema = database() order by 1') as [{ name: string }[]]
    const sums: Record<string, unknown> = {}
    for (const { name } of tables) {
      const [[row]] = await db.raw('checksum table ?? extended', [name]) as [[{ Checksum: unknown }]]
      sums[name] = row.Checksum
    }
    return sums
  }
  finally {
    await db.destroy()
  }
}

async function hashes(folder: string): Promise<Record<string, string>> {
  const store = path.join(folder, 'store')
  return Object.fromEntries(await Promise.all((await filesIn(store)).map(async name => [name, await hashFile(path.join(store, name))])))
}

describe('backup and restore', () => {
  it('bring back every row and every byte, never overwrite, and refuse a damaged copy', async () => {
    const { folder, databaseUrl } = inject('lull')
    const [copy, fresh] = [path.join(place, 'copy'), path.join(place, 'fresh')]
    const made = await command('backup.ts', copy, folder)
    expect(made).toMatchObject({ code: 0 })
    expect((await command('backup.ts', copy, folder)).code).toBe(1)

    const restored = await command('restore.ts', copy, fresh)
    expect(restored).toMatchObject({ code: 0 })
    const database = await startDatabase(fresh, { wantedPort: 23_306, durable: false })
    try {
      const before = await checksums(databaseUrl)
      expect(Object.keys(before)).toContain('run_files')
      expect(await checksums(database.url)).toEqual(before)
    }
    finally {
      await database.stop()
    }
    const files = await hashes(folder)
    expect(Object.keys(files).length).toBeGreaterThan(0)
    expect(await hashes(fresh)).toEqual(files)

    const again = await command('restore.ts', copy, fresh)
    expect(again.code).toBe(1)
    expect(again.said).toContain('never overwrites')

    await appendFile(path.join(copy, 'store', Object.keys(files)[0]!), 'x')
    const damaged = await command('restore.ts', copy, path.join(place, 'other'))
    expect(damaged.code).toBe(1)
    expect(damaged.said).toContain('damaged')
    expect(await readdir(place)).not.toContain('other')
  }, 120_000)
})
