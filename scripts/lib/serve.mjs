/** Brings everything up in order and ends it cleanly; shared by start and dev. */
import path from 'node:path'
import { endAllChildren, endLeftovers, markChildren, markOf } from './children.mjs'
import { databasePackages, ensureNodeModules, ensurePackages } from './install.mjs'
import { lockFolder } from './lock.mjs'
import { startDatabase } from './mariadb.mjs'
import { callable, sessionSecret } from './server.mjs'
import { freePort, portIsFree, requireNode, root, say, SetupError } from './system.mjs'

export const dataFolder = () => path.resolve(root, process.env.LULL_DATA_DIR || '.data')

/** Address to serve on: PORT if it was given (it must be free then), otherwise 3000 or the next free one. */
async function address() {
  const host = process.env.HOST || '127.0.0.1'
  if (process.env.PORT) {
    const port = Number(process.env.PORT)
    if (!Number.isInteger(port) || port < 1 || port > 65535) throw new SetupError(`PORT is "${process.env.PORT}"; it must be a number from 1 to 65535.`)
    if (!await portIsFree(port, host)) throw new SetupError(`Port ${port} of ${host} cannot be used: something else listens there, or the address is not this machine's. Choose another: PORT=… npm start.`)
    return { host, port }
  }
  const port = await freePort(3000, host)
  if (port !== 3000) say(`Port 3000 is in use; Lull takes ${port}.`)
  return { host, port }
}

/** What ends with this command, in order; filled as things are started. */
const ending = []
let ended = null

/** Ends children, then what was added by `atEnd`, then this process. Safe to call twice. */
export function endEverything(code) {
  ended ??= (async () => {
    await endAllChildren()
    for (const step of ending) await step()
    process.exit(code)
  })()
  return ended
}

export const isEnding = () => ended !== null
export const atEnd = step => void ending.push(step)

/** From here on, Ctrl-C and SIGTERM end everything in order. */
export function endOnSignals(beforehand = () => {}) {
  for (const signal of ['SIGINT', 'SIGTERM', 'SIGHUP']) {
    process.on(signal, () => {
      if (!isEnding()) {
        say('\nEnding …')
        beforehand()
      }
      void endEverything(0)
    })
  }
}

/** Settings under their documented names (LULL_…) as the server reads them. */
function settingsOf({ host, port, folder, databaseUrl }) {
  const publicUrl = process.env.LULL_PUBLIC_URL || `http://${callable(host)}:${port}`
  const secure = publicUrl.startsWith('https:')
  return {
    ...markOf(folder),
    HOST: host, PORT: String(port), NITRO_HOST: host, NITRO_PORT: String(port),
    LULL_DEMO: process.env.LULL_DEMO === '0' ? '0' : '1',
    NUXT_DATABASE_URL: databaseUrl, NUXT_SESSION_PASSWORD: sessionSecret(folder),
    NUXT_SMTP_URL: process.env.LULL_SMTP_URL || 'local', NUXT_PUBLIC_URL: publicUrl,
    ...(process.env.LULL_MAIL_FROM ? { NUXT_MAIL_FROM: process.env.LULL_MAIL_FROM } : {}),
    NUXT_SESSION_COOKIE_SECURE: String(secure), NUXT_SESSION_NAME: secure ? '__Host-lull-session' : 'lull-session',
  }
}

/** Everything before the server itself: lock, packages, npm modules, database, secret. */
export async function prepare(command) {
  requireNode()
  const folder = dataFolder()
  const lock = await lockFolder(folder, command)
  ending.push(() => lock.release())
  endOnSignals(() => lock.note({ ending: true }))
  const left = await endLeftovers(folder)
  if (left > 0) say(`Ended what an earlier, killed start had left running (${left} ${left === 1 ? 'process' : 'processes'}).`)
  markChildren(folder)
  await ensurePackages(databasePackages)
  await ensureNodeModules()
  const { host, port } = await address()
  say('Starting the private database …')
  const database = await startDatabase(folder, { wantedPort: 3306 + (port % 1000), onStart: stop => ending.unshift(stop) })
  const env = settingsOf({ host, port, folder, databaseUrl: database.url })
  return { database, env, host, port, demo: env.LULL_DEMO === '1', folder, lock }
}

/** Prints a setup problem plainly, anything else with its stack, and leaves with 1. */
export async function fail(error) {
  if (!isEnding()) console.error(error instanceof SetupError ? `\n${error.message}\n` : error)
  await endEverything(1)
}
