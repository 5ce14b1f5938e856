/** Brings everything up in order and ends it cleanly; shared by start and dev. */
import { existsSync, mkdirSync } from 'node:fs'
import path from 'node:path'
import { ensureNodeModules, ensurePackages, freePort, portIsFree, root, say, SetupError } from './system.mjs'

export const databasePackages = [{ name: 'mariadb-server', programs: ['mariadbd', 'mysqld'] }, { name: 'mariadb-client', programs: ['mariadb', 'mysql'] }]
export const browserPackages = [{ name: 'chromium', programs: ['chromium'] }]

export const dataFolder = () => path.resolve(root, process.env.LULL_DATA_DIR || '.data')

/** Address to serve on: PORT if it was given (it must be free then), otherwise 3000 or the next free one. */
export async function address() {
  const host = process.env.HOST || '127.0.0.1'
  if (process.env.PORT) {
    const port = Number(process.env.PORT)
    if (!Number.isInteger(port) || port < 1 || port > 65535) throw new SetupError(`PORT is "${process.env.PORT}"; it must be a number from 1 to 65535.`)
    if (!await portIsFree(port, host)) throw new SetupError(`Port ${port} of ${host} is in use, perhaps by a Lull that still runs. End it, or choose another with PORT=… npm start.`)
    return { host, port }
  }
  const port = await freePort(3000, host)
  if (port !== 3000) say(`Port 3000 is in use; Lull takes ${port}.`)
  return { host, port }
}

/** Everything before the server itself: packages, npm modules, database, secret. */
export async function prepare() {
  const [major, minor] = process.versions.node.split('.').map(Number)
  if (major < 20 || (major === 20 && minor < 19)) throw new SetupError(`Lull needs Node.js 20.19 or newer; this is ${process.versions.node}.`)
  ensurePackages(databasePackages)
  ensureNodeModules()
  const folder = dataFolder()
  mkdirSync(folder, { recursive: true, mode: 0o700 })
  // Imported late: these need nothing from npm either, but their work makes no sense before.
  const { startDatabase } = await import('./mariadb.mjs')
  const { sessionSecret } = await import('./server.mjs')
  const { host, port } = await address()
  const database = await startDatabase(folder, { wantedPort: port + 306 })
  const demo = process.env.LULL_DEMO !== '0'
  const publicUrl = process.env.NUXT_PUBLIC_URL || `http://${host}:${port}`
  const env = {
    HOST: host, PORT: String(port), NITRO_HOST: host, NITRO_PORT: String(port), LULL_DEMO: demo ? '1' : '0',
    NUXT_DATABASE_URL: database.url, NUXT_SESSION_PASSWORD: sessionSecret(folder), NUXT_DATA_DIR: folder,
    NUXT_SMTP_URL: process.env.NUXT_SMTP_URL || 'local', NUXT_PUBLIC_URL: publicUrl,
    NUXT_SESSION_COOKIE_SECURE: publicUrl.startsWith('https:') ? 'true' : 'false',
  }
  return { database, env, host, port, demo, folder, url: `http://${host}:${port}` }
}

/**
 * Ends the children in order when this process is told to: first the server, then the database. Returns a function
 * that does the same.
 */
export function endCleanly(parts) {
  let ending = null
  const end = (code) => {
    ending ??= (async () => {
      for (const part of parts) await part()
      process.exit(code)
    })()
    return ending
  }
  for (const [signal, code] of [['SIGINT', 0], ['SIGTERM', 0], ['SIGHUP', 0]]) process.on(signal, () => void end(code))
  return end
}

/** Ends a child process: politely, and after ten seconds by force. */
export function endChild(child) {
  return new Promise((resolve) => {
    if (child.exitCode !== null || child.signalCode !== null) return resolve()
    const force = setTimeout(() => child.kill('SIGKILL'), 10_000)
    child.once('exit', () => {
      clearTimeout(force)
      resolve()
    })
    child.kill('SIGTERM')
  })
}

/** Prints a setup problem plainly, anything else with its stack, and leaves with 1. */
export function fail(error) {
  console.error(error instanceof SetupError ? `\n${error.message}\n` : error)
  process.exit(1)
}

export const seedScript = () => {
  const file = path.join(root, 'scripts', 'seed', 'index.ts')
  return existsSync(file) ? file : null
}
