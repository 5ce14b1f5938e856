/** `npm run backup -- FOLDER`: a complete copy of the database and the filed files. Lull may run meanwhile. */
import { copyFile, mkdir, rename, rm, stat, writeFile } from 'node:fs/promises'
import { existsSync } from 'node:fs'
import path from 'node:path'
import { DATABASE, dumpDatabase, filesIn, hashFile, MANIFEST, STORE, type Manifest } from './lib/copies'
import { startDatabase } from './lib/mariadb.mjs'
import { dataFolder } from './lib/serve.mjs'
import { say, SetupError } from './lib/system.mjs'

async function backup(target: string): Promise<void> {
  if (existsSync(target)) throw new SetupError(`${target} is there already. A backup never overwrites: name a folder that does not exist yet.`)
  const folder = dataFolder()
  if (!existsSync(path.join(folder, 'mysql'))) throw new SetupError(`There is no Lull in ${folder} to make a copy of.`)
  const making = `${target}.partial`
  await rm(making, { recursive: true, force: true })
  await mkdir(path.join(making, STORE), { recursive: true, mode: 0o700 })
  const database = await startDatabase(folder, { wantedPort: 3306 })
  try {
    // The database first: every file that it names is in the store by then, and files never change.
    await dumpDatabase(database.url, path.join(making, DATABASE))
  }
  finally {
    if (!database.found) await database.stop()
  }
  const files: Manifest['files'] = []
  for (const name of await filesIn(path.join(folder, STORE))) {
    const copy = path.join(making, STORE, name)
    await mkdir(path.dirname(copy), { recursive: true })
    await copyFile(path.join(folder, STORE, name), copy)
    files.push({ path: name, sizeBytes: (await stat(copy)).size, sha256: await hashFile(copy) })
  }
  const sql = path.join(making, DATABASE)
  const manifest: Manifest = {
    format: 'lull-backup', version: 1, madeAt: new Date().toISOString(),
    database: { file: DATABASE, sizeBytes: (await stat(sql)).size, sha256: await hashFile(sql) }, files,
  }
  await writeFile(path.join(making, MANIFEST), `${JSON.stringify(manifest, null, 1)}\n`)
  await rename(making, target)
  say(`The backup is in ${target}: the database (${manifest.database.sizeBytes} bytes) and ${files.length} files (${files.reduce((sum, file) => sum + file.sizeBytes, 0)} bytes).`)
}

const target = process.argv[2]
try {
  if (!target) throw new SetupError('Name the folder for the backup: npm run backup -- FOLDER')
  await backup(path.resolve(target))
}
catch (error) {
  console.error(error instanceof SetupError ? error.message : error)
  process.exit(1)
}
