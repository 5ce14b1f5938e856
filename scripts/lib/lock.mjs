/** One command at a time works in a data folder. A lock left by a killed command is seen as such and taken over. */
import { linkSync, mkdirSync, readFileSync, readlinkSync, renameSync, rmSync, writeFileSync } from 'node:fs'
import path from 'node:path'
import { root, SetupError, sleep } from './system.mjs'

/**
 * @returns {Promise<{ note: (facts: object) => void, release: () => void }>} `note` adds facts that the next asker is told
 */
export async function lockFolder(folder, command) {
  mkdirSync(folder, { recursive: true, mode: 0o700 })
  const file = path.join(folder, 'lock.json')
  const own = `${file}.${process.pid}`
  let facts = { pid: process.pid, command, since: new Date().toISOString(), url: null, ending: false }
  const write = () => writeFileSync(own, JSON.stringify(facts))
  write()
  for (let i = 0; ; i++) {
    try {
      linkSync(own, file)
      break
    }
    catch (error) {
      if (error.code !== 'EEXIST') throw error
    }
    const holder = readLock(file)
    if (!holder || !isAlive(holder)) {
      rmSync(file, { force: true })
      continue
    }
    if (holder.ending && i < 400) {
      await sleep(100)
      continue
    }
    rmSync(own, { force: true })
    throw new SetupError(`Lull already works in this folder: ${holder.command}, process ${holder.pid}${holder.url ? `, at ${holder.url}` : ''}. End that one first (Ctrl-C in its window, or kill ${holder.pid}); nothing was changed.`)
  }
  rmSync(own, { force: true })
  return {
    note(more) {
      facts = { ...facts, ...more }
      write()
      renameSync(own, file)
    },
    release() {
      if (readLock(file)?.pid === process.pid) rmSync(file, { force: true })
    },
  }
}

function readLock(file) {
  try {
    return JSON.parse(readFileSync(file, 'utf8'))
  }
  catch {
    return null
  }
}

/** Whether the process of a lock still runs and is one of this checkout's commands, and not another one with its id. */
function isAlive({ pid }) {
  try {
    const words = readFileSync(`/proc/${pid}/cmdline`, 'utf8').split('\0')
    const cwd = readlinkSync(`/proc/${pid}/cwd`)
    return words.some(word => path.resolve(cwd, word).startsWith(path.join(root, 'scripts', path.sep)))
  }
  catch {
    return false
  }
}
