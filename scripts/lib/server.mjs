/** Secrets, build and server process of the start, development and test commands. */
import { spawn, spawnSync } from 'node:child_process'
import { createHash, randomBytes } from 'node:crypto'
import { existsSync, mkdirSync, readdirSync, readFileSync, renameSync, statSync, writeFileSync } from 'node:fs'
import path from 'node:path'
import { root, say, SetupError, sleep } from './system.mjs'

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

/** Builds when the sources are not those of the build that is there. */
export function ensureBuilt() {
  const stamp = path.join(root, '.output', '.sources')
  const current = sourceHash()
  if (existsSync(stamp) && readFileSync(stamp, 'utf8') === current) return
  say('Building Lull (about a minute) …')
  const result = spawnSync(process.execPath, [path.join(root, 'node_modules', 'nuxt', 'bin', 'nuxt.mjs'), 'build'], {
    cwd: root, encoding: 'utf8', env: { ...process.env, NODE_ENV: 'production', NUXT_TELEMETRY_DISABLED: '1' },
  })
  if (result.status !== 0) throw new SetupError(`The build failed:\n${`${result.stdout}\n${result.stderr}`.trim().split('\n').slice(-25).join('\n')}`)
  writeFileSync(stamp, current)
}

/** Starts the built server; resolves when /api/health answers 200. */
export async function startServer(env, { quiet = false } = {}) {
  const child = spawn(process.execPath, [path.join(root, '.output', 'server', 'index.mjs')], {
    cwd: root, env: { ...process.env, NODE_ENV: 'production', ...env }, stdio: ['ignore', quiet ? 'pipe' : 'inherit', 'inherit'],
  })
  const url = `http://${env.HOST}:${env.PORT}`
  for (let i = 0; i < 300; i++) {
    if (child.exitCode !== null) throw new SetupError('The server ended at its start; what it said stands above.')
    try {
      const answer = await fetch(`${url}/api/health`)
      if (answer.ok) return { child, url }
    }
    catch { /* not yet */ }
    await sleep(100)
  }
  child.kill('SIGTERM')
  throw new SetupError('The server did not answer within half a minute.')
}
