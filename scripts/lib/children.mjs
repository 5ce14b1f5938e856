/** Programs that a command starts: followed, so that ending the command ends them too, and nothing is left behind. */
import { spawn } from 'node:child_process'
import { readdirSync, readFileSync } from 'node:fs'
import { root, sleep } from './system.mjs'

const running = new Set()

/**
 * Runs a program to its end. Its output is collected, and shown as it comes when `show` is set. Children stand in a
 * process group of their own, so that Ctrl-C reaches this command alone, which then ends them in order.
 *
 * @returns {Promise<{ code: number, output: string }>}
 */
export function run(program, args, { env = process.env, show = false, cwd = root } = {}) {
  return new Promise((resolve) => {
    const child = follow(spawn(program, args, { cwd, env, detached: true, stdio: ['ignore', 'pipe', 'pipe'] }))
    const parts = []
    const take = to => (part) => {
      parts.push(part)
      if (show) to.write(part)
    }
    child.stdout.on('data', take(process.stdout))
    child.stderr.on('data', take(process.stderr))
    child.once('error', error => resolve({ code: 1, output: error.message }))
    child.once('close', (code, signal) => resolve({ code: code ?? (signal ? 1 : 0), output: Buffer.concat(parts).toString('utf8') }))
  })
}

/** Remembers a child until it ends. */
export function follow(child) {
  running.add(child)
  child.once('exit', () => running.delete(child))
  child.once('error', () => running.delete(child))
  return child
}

/** Ends a child and its group: politely, and after `patienceMs` by force. */
export async function endChild(child, patienceMs = 12_000) {
  if (child.exitCode !== null || child.signalCode !== null || !child.pid) return
  const gone = new Promise(resolve => child.once('exit', resolve))
  signalGroup(child.pid, 'SIGTERM')
  const force = setTimeout(() => signalGroup(child.pid, 'SIGKILL'), patienceMs)
  await gone
  clearTimeout(force)
}

export async function endAllChildren() {
  await Promise.all([...running].map(child => endChild(child)))
}

function signalGroup(pid, signal) {
  try {
    process.kill(-pid, signal)
  }
  catch { /* already gone */ }
}

/** Settings that mark a process as belonging to a data folder; see endLeftovers. */
export const markOf = folder => ({ LULL_CHILD: folder, NUXT_DATA_DIR: folder })

/** From here on, every child of this command carries the mark; packages of the system and the database are exempt. */
export function markChildren(folder) {
  process.env.LULL_CHILD = folder
}

/** The environment without the mark. */
export function unmarked() {
  const env = { ...process.env }
  delete env.LULL_CHILD
  return env
}

/**
 * Ends what an earlier command of this data folder left running when it was killed: only processes that carry our own
 * mark in their environment. Answers how many.
 */
export async function endLeftovers(folder) {
  const ours = readdirSync('/proc').filter(name => /^\d+$/.test(name)).map(Number).filter(pid => pid !== process.pid && carriesMark(pid, folder))
  for (const pid of ours) trySignal(pid, 'SIGTERM')
  for (let i = 0; i < 240 && ours.some(pid => carriesMark(pid, folder)); i++) await sleep(50)
  for (const pid of ours) if (carriesMark(pid, folder)) trySignal(pid, 'SIGKILL')
  return ours.length
}

function carriesMark(pid, folder) {
  try {
    // A process that has ended but was not yet collected by its parent has an empty environment.
    return readFileSync(`/proc/${pid}/environ`, 'utf8').split('\0').includes(`LULL_CHILD=${folder}`)
  }
  catch {
    return false
  }
}

function trySignal(pid, signal) {
  try {
    process.kill(pid, signal)
  }
  catch { /* already gone */ }
}
