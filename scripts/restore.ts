/** `npm run restore -- FOLDER`: brings a backup into an empty Lull. Everything is checked before anything is written. */
import { copyFile, mkdir, readFile, rename, rm, stat, writeFile } from 'node:fs/promises'
import { existsSync } from 'node:fs'
import path from 'node:path'
import createKnex, { type Knex } from 'knex'
import { DATABASE, filesIn, hashFile, loadDatabase, MANIFEST, STORE, type Manifest } from './lib/copies'
import { lockFolder } from './lib/lock.mjs'
import { startDatabase } from './lib/mariadb.mjs'
import { dataFolder } from './lib/serve.mjs'
import { say, SetupError } from './lib/system.mjs'

async function readManifest(source: string): Promise<Manifest> {
  let manifest: Manifest
  try {
    manifest = JSON.parse(await readFile(path.join(source, MANIFEST), 'utf8')) as Manifest
  }
  catch {
    throw new SetupError(`${source} is not a backup of Lull: it has no readable ${MANIFEST}. Nothing was changed.`)
  }
  if (manifest.format !== 'lull-backup' || manifest.version !== 1) throw new SetupError('This backup was made by another version of Lull, which this one does not know. Nothing was changed.')
  return manifest
}

/** Every byte of the backup against its manifest. */
async function checkBackup(source: string, manifest: Manifest): Promise<void> {
  const expected = [{ path: DATABASE, ...manifest.database }, ...manifest.files.map(file => ({ ...file, path: `${STORE}/${file.path}` }))]
  for (const { path: name, sizeBytes, sha256 } of expected) {
    const file = path.join(source, name)
    const inside = path.relative(source, path.resolve(file))
    const sound = !inside.startsWith('..') && existsSync(file) && (await stat(file)).size === sizeBytes && await hashFile(file) === sha256
    if (!sound) throw new SetupError(`The backup is damaged: ${name} is missing or is not what was saved. Nothing was changed.`)
  }
}

async function tablesOf(db: Knex): Promise<string[]> {
  const [rows] = await db.raw('select table_name as name from information_schema.tables where table_schema = database()') as [{ name: string }[]]
  return rows.map(({ name }) => name)
}

async function emptyDatabase(db: Knex): Promise<void> {
  const tables = await tablesOf(db)
  await db.transaction(async (trx) => {
    await trx.raw('set foreign_key_checks = 0')
    for (const table of tables) await trx.raw('drop table ??', [table])
    await trx.raw('set foreign_key_checks = 1')
  })
}

async function restore(source: string): Promise<void> {
  const folder = dataFolder()
  const manifest = await readManifest(source)
  say('Checking the backup …')
  await checkBackup(source, manifest)
  const lock = await lockFolder(folder, 'npm run restore')
  const database = await startDatabase(folder, { wantedPort: 3306 })
  const db = createKnex({ client: 'mysql2', connection: database.url, pool: { min: 0, max: 1 } })
  // Stands while a restore is under way: one that was killed may be given again, over what it left.
  const underWay = path.join(folder, 'restoring')
  try {
    const tables = await tablesOf(db)
    const filled = (tables.includes('clubs') && (await db('clubs').first('id')) !== undefined) || (await filesIn(path.join(folder, STORE))).length > 0
    if (filled && !existsSync(underWay)) throw new SetupError(`There is a club in ${folder} already. A restore never overwrites one: move that folder away, or name another by LULL_DATA_DIR. Nothing was changed.`)
    await writeFile(underWay, source)
    await emptyDatabase(db)
    await loadDatabase(database.url, path.join(source, DATABASE))
    for (const { path: name, sha256 } of manifest.files) {
      const place = path.join(folder, STORE, name)
      await mkdir(path.dirname(place), { recursive: true })
      await copyFile(path.join(source, STORE, name), `${place}.new`)
      if (await hashFile(`${place}.new`) !== sha256) throw new SetupError(`${name} could not be written as it was saved. Is the disk full? Give the same command again.`)
      await rename(`${place}.new`, place)
    }
    await rm(underWay)
    say(`Restored: the database and ${manifest.files.length} files, as of ${manifest.madeAt}. Start Lull with npm start; everybody signs in again.`)
  }
  finally {
    await db.destroy()
    await database.stop()
    lock.release()
  }
}

const source = process.argv[2]
try {
  if (!source) throw new SetupError('Name the folder of the backup: npm run restore -- FOLDER')
  await restore(path.resolve(source))
}
catch (error) {
  console.error(error instanceof SetupError ? error.message : error)
  process.exit(1)
}
