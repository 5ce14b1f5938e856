/** Installs what a command needs and the machine lacks: Debian packages, and the npm packages of the lock file. */
import { existsSync, readFileSync, writeFileSync } from 'node:fs'
import path from 'node:path'
import { run, unmarked } from './children.mjs'
import { findProgram, hashOf, root, say, SetupError } from './system.mjs'

/** The packages without a service of their own: nothing of the system's is started, enabled or configured. */
export const databasePackages = [{ name: 'mariadb-server-core', programs: ['mariadbd', 'mysqld'] }, { name: 'mariadb-client', programs: ['mariadb', 'mysql'] }]
export const browserPackages = [{ name: 'chromium', programs: ['chromium'] }]

const lastLines = (text, count = 10) => text.trim().split('\n').slice(-count).join('\n')

/** Installs Debian packages whose programs are missing: as root at once, otherwise by telling the one command. */
export async function ensurePackages(wanted) {
  const packages = wanted.filter(({ programs }) => !findProgram(...programs)).map(({ name }) => name)
  if (packages.length === 0) return
  const command = `apt-get update && apt-get install -y --no-install-recommends ${packages.join(' ')}`
  if (process.getuid?.() !== 0) {
    throw new SetupError(`Lull needs Debian's ${packages.join(' and ')}. Nothing was changed. Install it once with:\n\n  sudo sh -c '${command}'\n\nand give the same command again.`)
  }
  if (!findProgram('apt-get')) throw new SetupError(`Lull needs ${packages.join(' and ')}, and there is no apt-get here to install it. Install it with this system's own tools and start again.`)
  say(`Installing Debian's ${packages.join(' and ')} …`)
  const env = { ...unmarked(), DEBIAN_FRONTEND: 'noninteractive' }
  for (const args of [['update', '-q'], ['install', '-y', '-q', '--no-install-recommends', ...packages]]) {
    const result = await run('apt-get', args, { env })
    if (result.code !== 0) throw new SetupError(`apt-get ${args[0]} failed:\n${lastLines(result.output)}\n\nMend that, or install it by hand, and start again:\n\n  ${command}`)
  }
}

/**
 * Installs the npm packages of the lock file when they are not there, or are those of another lock file. npm writes
 * its own list (.package-lock.json) last, so that a folder without it is an installation that was cut short.
 */
export async function ensureNodeModules() {
  const current = hashOf(path.join(root, 'package-lock.json'))
  const folder = path.join(root, 'node_modules')
  const stamp = path.join(folder, '.installed-lock')
  const complete = existsSync(path.join(folder, '.package-lock.json'))
  if (complete && existsSync(stamp) && readFileSync(stamp, 'utf8') === current) return
  if (complete && (await run('npm', ['ls', '--silent'])).code === 0) {
    writeFileSync(stamp, current)
    return
  }
  say('Installing npm packages from the lock file (about a minute) …')
  const result = await run('npm', ['ci', '--include=dev', '--no-audit', '--no-fund', '--loglevel=error'], {
    env: { ...process.env, PLAYWRIGHT_SKIP_BROWSER_DOWNLOAD: '1' },
  })
  if (result.code !== 0) throw new SetupError(`npm ci failed:\n${lastLines(result.output, 12)}\n\nIs the npm registry within reach? Start again when it is; nothing else was changed.`)
  writeFileSync(stamp, current)
}
