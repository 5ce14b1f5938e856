/** Secret, build and server process of the start, development and test commands. */
import { spawn } from 'node:child_process'
import { createHash, randomBytes } from 'node:crypto'
import { existsSync, mkdirSync, openSync, readdirSync, readFileSync, renameSync, rmSync, statSync, writeFileSync } from 'node:fs'
import path from 'node:path'
import { endChild, follow, run } from './children.mjs'
import { root, say, SetupError, sleep } from './system.mjs'

const MAX_LOG_BYTES = 20 * 2 ** 20

/** The session secret of this data folder, made once and kept readable by its owner only. */
export function sessionSecret(folder) {
  const file = path.join(folder, 'session-secret')
  if (existsSync(file)) {
    const secret = readFileSync(file, 'utf8').trim()
    if (secret.length >= 32) return secret
  }
  const secret = randomBytes(36).toString('base64url')
  mkdirSync(folder, { recursive: true, mode: 0o700 })
  writeFileSync(`${file}.new`, `${secret}\n`, { mode: 0o600 })
  renameSync(`${file}.new`, file)
  return secret
}

/** What the built server depends on: every source file and the lock file. */
const sourceRoots = ['app.vue', 'error.vue', 'nuxt.config.ts', 'tailwind.config.ts', 'package-lock.json', 'assets', 'components', 'composables', 'layouts', 'middleware', 'migrations', 'modules', 'pages', 'plugins', 'public', 'server', 'shared', 'stores', 'workers']

function* filesUnder(place) {
  if (!existsSync(place)) return
  if (statSync(place).isFile()) {
    yield place
    return
  }
  for (const entry of readdirSync(place).sort()) yield* filesUnder(path.join(place, entry))
}

/** SHA-256 over the names and bytes of all sources. */
export function sourceHash() {
  const hash = createHash('sha256')
  for (const start of sourceRoots) {
    for (const file of filesUnder(path.join(root, start))) hash.update(path.relative(root, file)).update('\0').update(readFileSync(file)).update('\0')
  }
  return hash.digest('hex')
}

/** Builds when the sources are not those of the build that is there. A build that was cut short has no stamp. */
export async function ensureBuilt() {
  const stamp = path.join(root, '.output', '.sources')
  const current = sourceHash()
  if (existsSync(stamp) && readFileSync(stamp, 'utf8') === current) return
  say('Building Lull from its sources (about a minute) …')
  rmSync(stamp, { force: true })
  const result = await run(process.execPath, [path.join(root, 'node_modules', 'nuxt', 'bin', 'nuxt.mjs'), 'build'], {
    env: { ...process.env, NODE_ENV: 'production', NUXT_TELEMETRY_DISABLED: '1' },
  })
  if (result.code !== 0) throw new SetupError(`The build failed:\n${result.output.trim().split('\n').slice(-25).join('\n')}`)
  writeFileSync(stamp, current)
}

function openLog(file) {
  mkdirSync(path.dirname(file), { recursive: true })
  if (existsSync(file) && statSync(file).size > MAX_LOG_BYTES) renameSync(file, `${file}.1`)
  return openSync(file, 'a', 0o600)
}

export const lastLogLines = (file, count = 15) => existsSync(file) ? readFileSync(file, 'utf8').trim().split('\n').slice(-count).join('\n') : ''

/** Starts the built server, which writes into `log`; resolves when /api/health answers 200. */
export async function startServer(env, log) {
  const out = openLog(log)
  const child = follow(spawn(process.execPath, [path.join(root, '.output', 'server', 'index.mjs')], {
    cwd: root, env: { ...process.env, NODE_ENV: 'production', NITRO_SHUTDOWN_TIMEOUT: '8000', ...env }, stdio: ['ignore', out, out], detached: true,
  }))
  // An address like 0.0.0.0 can be listened on, but not called.
  const url = `http://${callable(env.HOST)}:${env.PORT}`
  for (let i = 0; i < 600; i++) {
    if (child.exitCode !== null || child.signalCode !== null) throw new SetupError(`The server ended at its start. Its log (${path.relative(root, log)}) says:\n${lastLogLines(log)}`)
    try {
      const answer = await fetch(`${url}/api/health`, { signal: AbortSignal.timeout(5000) })
      if (answer.ok) return { child, url }
    }
    catch { /* not yet */ }
    await sleep(100)
  }
  await endChild(child)
  throw new SetupError(`The server did not become healthy within a minute. Its log (${path.relative(root, log)}) says:\n${lastLogLines(log)}`)
}

/** A host as it is written in an address that a browser can open. */
export function callable(host) {
  if (host === '0.0.0.0') return '127.0.0.1'
  if (host === '::') return '[::1]'
  return host.includes(':') ? `[${host}]` : host
}
