/** What the commands need from the machine: said plainly, installed where that is allowed. No dependency but Node. */
import { spawnSync } from 'node:child_process'
import { accessSync, constants, existsSync, readFileSync, writeFileSync } from 'node:fs'
import { createServer } from 'node:net'
import { createHash } from 'node:crypto'
import path from 'node:path'
import { fileURLToPath } from 'node:url'

export const root = fileURLToPath(new URL('../..', import.meta.url))

/** A problem the user can mend; its message is all that is printed. */
export class SetupError extends Error {}

export function say(text) {
  process.stdout.write(`${text}\n`)
}

/** First of these programs that can be run, or null. */
export function findProgram(...names) {
  const folders = [...(process.env.PATH ?? '').split(':'), '/usr/sbin', '/usr/bin', '/sbin', '/usr/local/bin']
  for (const name of names) {
    for (const folder of folders) {
      const candidate = path.join(folder, name)
      try {
        accessSync(candidate, constants.X_OK)
        return candidate
      }
      catch { /* look on */ }
    }
  }
  return null
}

/** Installs Debian packages when their programs are missing: by root at once, otherwise by telling the one command. */
export function ensurePackages(wanted) {
  const missing = wanted.filter(({ programs }) => !findProgram(...programs))
  if (missing.length === 0) return
  const packages = missing.map(({ name }) => name)
  const command = `apt-get update && apt-get install -y --no-install-recommends ${packages.join(' ')}`
  if (process.getuid?.() !== 0) {
    throw new SetupError(`Lull needs Debian's ${packages.join(' and ')}. Nothing was changed. Install it once with:\n\n  sudo sh -c '${command}'\n\nand give the same command again.`)
  }
  if (!findProgram('apt-get')) throw new SetupError(`Lull needs ${packages.join(' and ')}, and there is no apt-get here to install it. Install it with this system's own tools and start again.`)
  say(`Installing Debian's ${packages.join(' and ')} …`)
  const env = { ...process.env, DEBIAN_FRONTEND: 'noninteractive' }
  // The package would start the system's own server; Lull runs a private one and leaves the system's alone.
  const policy = '/usr/sbin/policy-rc.d'
  const ownPolicy = !existsSync(policy)
  if (ownPolicy) writeFileSync(policy, '#!/bin/sh\nexit 101\n', { mode: 0o755 })
  try {
    for (const args of [['update', '-q'], ['install', '-y', '-q', '--no-install-recommends', ...packages]]) {
      const result = spawnSync('apt-get', args, { env, encoding: 'utf8' })
      if (result.status !== 0) throw new SetupError(`apt-get ${args[0]} failed:\n${(result.stderr || result.stdout || '').trim().split('\n').slice(-8).join('\n')}`)
    }
  }
  finally {
    if (ownPolicy) spawnSync('rm', ['-f', policy])
  }
}

const hashOf = file => createHash('sha256').update(readFileSync(file)).digest('hex')

/** Installs the npm packages of the lock file when they are not there, or not those of today's lock file. */
export function ensureNodeModules() {
  const lock = path.join(root, 'package-lock.json')
  const stamp = path.join(root, 'node_modules', '.installed-lock')
  const current = hashOf(lock)
  if (existsSync(stamp) && readFileSync(stamp, 'utf8') === current) return
  // A folder that npm itself says agrees with the lock file need not be made again.
  if (existsSync(path.join(root, 'node_modules', 'nuxt')) && spawnSync('npm', ['ls', '--silent'], { cwd: root, stdio: 'ignore' }).status === 0) {
    writeFileSync(stamp, current)
    return
  }
  say('Installing npm packages from the lock file …')
  const result = spawnSync('npm', ['ci', '--no-audit', '--no-fund', '--loglevel=error'], {
    cwd: root, encoding: 'utf8', env: { ...process.env, PLAYWRIGHT_SKIP_BROWSER_DOWNLOAD: '1' },
  })
  if (result.status !== 0) throw new SetupError(`npm ci failed:\n${(result.stderr || result.stdout || '').trim().split('\n').slice(-12).join('\n')}`)
  writeFileSync(stamp, current)
}

/** True where nothing listens on this port of this address. */
export function portIsFree(port, host = '127.0.0.1') {
  return new Promise((resolve) => {
    const server = createServer()
    server.once('error', () => resolve(false))
    server.listen({ port, host, exclusive: true }, () => server.close(() => resolve(true)))
  })
}

/** The wanted port if free, otherwise the next free one above it, otherwise any. */
export async function freePort(wanted, host = '127.0.0.1') {
  for (let port = wanted; port < wanted + 200; port++) if (await portIsFree(port, host)) return port
  return new Promise((resolve, reject) => {
    const server = createServer()
    server.once('error', reject)
    server.listen({ port: 0, host }, () => {
      const { port } = server.address()
      server.close(() => resolve(port))
    })
  })
}

/** Whether a process of this id runs, and its command line holds this text (so that a reused id is not mistaken). */
export function processRuns(pid, text) {
  try {
    return readFileSync(`/proc/${pid}/cmdline`, 'utf8').replaceAll('\0', ' ').includes(text)
  }
  catch {
    return false
  }
}

export const sleep = ms => new Promise(resolve => setTimeout(resolve, ms))

export { hashOf }
