/** The built server on a database with throw-away data, for tests. */
import { rmSync } from 'node:fs'
import path from 'node:path'
import { endChild, endLeftovers, markOf } from './children.mjs'
import { startDatabase, stopDatabaseOf } from './mariadb.mjs'
import { sessionSecret, startServer } from './server.mjs'
import { freePort } from './system.mjs'

/**
 * @param {string} folder is emptied, and afterwards holds the database, the store and server.log
 * @param {{ demo?: boolean, env?: Record<string, string>, onStart?: (stop: () => Promise<void>) => void }} options
 *   onStart gets each way to stop something as soon as it runs
 * @returns {Promise<{ url: string, env: Record<string, string>, databaseUrl: string, log: string, folder: string,
 *   stop: () => Promise<void>, kill: () => Promise<void>, start: () => Promise<void> }>}
 *   `kill` ends the server by SIGKILL, `start` starts it again on the same data and port
 */
export async function startTestServer(folder, { demo = false, env: more = {}, onStart = () => {} } = {}) {
  await endLeftovers(folder)
  await stopDatabaseOf(folder)
  rmSync(folder, { recursive: true, force: true })
  // Any port that is free, far from those that people choose, and another one for each process.
  const base = 20_000 + (process.pid * 7) % 20_000
  const database = await startDatabase(folder, { wantedPort: base, durable: false, onStart })
  const port = await freePort(base + 200)
  const env = {
    ...markOf(folder), HOST: '127.0.0.1', PORT: String(port), NITRO_HOST: '127.0.0.1', NITRO_PORT: String(port), LULL_DEMO: demo ? '1' : '0',
    NUXT_DATABASE_URL: database.url, NUXT_SESSION_PASSWORD: sessionSecret(folder), NUXT_SMTP_URL: 'local',
    NUXT_PUBLIC_URL: `http://127.0.0.1:${port}`, NUXT_SESSION_COOKIE_SECURE: 'false', ...more,
  }
  const log = path.join(folder, 'server.log')
  let running = await startServer(env, log)
  const server = {
    url: running.url, env, databaseUrl: database.url, log, folder,
    async kill() {
      const gone = new Promise(resolve => running.child.once('exit', resolve))
      process.kill(running.child.pid, 'SIGKILL')
      await gone
    },
    async start() {
      running = await startServer(env, log)
    },
    async stop() {
      await endChild(running.child)
      await database.stop()
    },
  }
  return server
}
