/** What a backup is: a folder with the database as SQL, the store's files, and a manifest that proves both. */
import { spawn } from 'node:child_process'
import { createHash } from 'node:crypto'
import { createReadStream, createWriteStream } from 'node:fs'
import { readdir } from 'node:fs/promises'
import path from 'node:path'
import { pipeline } from 'node:stream/promises'
import { findProgram, SetupError } from './system.mjs'

export interface Manifest {
  format: 'lull-backup', version: 1, madeAt: string
  database: { file: string, sizeBytes: number, sha256: string }
  /** Paths relative to the store, with forward slashes. */
  files: { path: string, sizeBytes: number, sha256: string }[]
}

export const MANIFEST = 'manifest.json'
export const DATABASE = 'database.sql'
export const STORE = 'store'

export async function hashFile(file: string): Promise<string> {
  const hash = createHash('sha256')
  await pipeline(createReadStream(file), hash)
  return hash.digest('hex')
}

/** Files under a folder, sorted, relative to it. A folder that is not there holds none. */
export async function filesIn(folder: string): Promise<string[]> {
  try {
    const entries = await readdir(folder, { recursive: true, withFileTypes: true })
    return entries.filter(entry => entry.isFile()).map(entry => path.relative(folder, path.join(entry.parentPath, entry.name)).replaceAll(path.sep, '/')).sort()
  }
  catch (error) {
    if ((error as NodeJS.ErrnoException).code === 'ENOENT') return []
    throw error
  }
}

/** A client program of MariaDB with the account of `url`; its password is given by the environment and not seen in a list of processes. */
function client(names: string[], url: string, args: string[], input: 'ignore' | 'pipe') {
  const program = findProgram(...names)
  if (!program) throw new SetupError(`Lull needs ${names[0]} for this; it is in Debian's package mariadb-client. Install it with:\n\n  apt-get install -y --no-install-recommends mariadb-client`)
  const { hostname, port, username, password, pathname } = new URL(url)
  return spawn(program, ['--no-defaults', `--host=${hostname}`, `--port=${port}`, `--user=${username}`, ...args, pathname.slice(1)], {
    stdio: [input, 'pipe', 'pipe'], env: { ...process.env, MYSQL_PWD: password },
  })
}

async function finished(child: ReturnType<typeof client>, what: string): Promise<void> {
  const said: Buffer[] = []
  child.stderr!.on('data', (part: Buffer) => said.push(part))
  const code = await new Promise<number | null>(resolve => child.once('close', resolve))
  if (code !== 0) throw new SetupError(`${what} failed: ${Buffer.concat(said).toString('utf8').trim()}`)
}

/** Writes the whole database as it is at one moment; Lull may run meanwhile. */
export async function dumpDatabase(url: string, file: string): Promise<void> {
  const child = client(['mariadb-dump', 'mysqldump'], url, ['--single-transaction', '--quick', '--hex-blob', '--skip-comments', '--default-character-set=utf8mb4'], 'ignore')
  await Promise.all([finished(child, 'Reading the database'), pipeline(child.stdout!, createWriteStream(file, { mode: 0o600 }))])
}

export async function loadDatabase(url: string, file: string): Promise<void> {
  const child = client(['mariadb', 'mysql'], url, ['--default-character-set=utf8mb4'], 'pipe')
  child.stdout!.resume()
  // A client that stops early closes its input; what it said is the better message.
  await Promise.all([finished(child, 'Writing the database'), pipeline(createReadStream(file), child.stdin!).catch(() => {})])
}
