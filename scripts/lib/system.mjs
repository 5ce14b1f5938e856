/** What the commands need to know of the machine. No dependency but Node. */
import { accessSync, constants, readFileSync } from 'node:fs'
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
  const folders = [...(process.env.PATH ?? '').split(':').filter(Boolean), '/usr/sbin', '/usr/bin', '/sbin', '/usr/local/bin']
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

export function requireNode() {
  const [major, minor] = process.versions.node.split('.').map(Number)
  if (major < 20 || (major === 20 && minor < 19)) throw new SetupError(`Lull needs Node.js 20.19 or newer; this is ${process.versions.node}.`)
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
  for (let port = wanted; port < wanted + 200 && port < 65536; port++) if (await portIsFree(port, host)) return port
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

export const hashOf = file => createHash('sha256').update(readFileSync(file)).digest('hex')
