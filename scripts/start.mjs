#!/usr/bin/env node
/** `npm start`: from a bare machine to a running Lull. Needs nothing but Node; see README.md. */
import { existsSync, readFileSync } from 'node:fs'
import path from 'node:path'
import { run } from './lib/children.mjs'
import { ensureBuilt, lastLogLines, startServer } from './lib/server.mjs'
import { endEverything, fail, isEnding, prepare } from './lib/serve.mjs'
import { root, say } from './lib/system.mjs'

const tsx = path.join(root, 'node_modules', 'tsx', 'dist', 'cli.mjs')

/** The demo's runs. The script ends at once where they are there, and goes on where it was interrupted. */
async function seedDemo({ env }, url) {
  const script = path.join(root, 'scripts', 'seed', 'index.ts')
  if (!existsSync(script)) return
  const { code } = await run(process.execPath, [tsx, script], { show: true, env: { ...process.env, ...env, LULL_BASE_URL: url } })
  if (code !== 0 && !isEnding()) say('The demo is not complete; the next start goes on with it. Lull itself works.')
}

async function printSignIns({ env }) {
  const { code, output } = await run(process.execPath, [tsx, path.join(root, 'scripts', 'sign-ins.ts')], { env: { ...process.env, ...env } })
  if (code === 0) say(`\nDemo sign-ins (e-mail address, password):\n${output.trimEnd()}`)
}

/** Of an empty club: how its first organiser comes in. The file is gone once the invitation was used. */
function printFirstInvitation({ folder }) {
  const file = path.join(folder, 'first-invitation.txt')
  if (existsSync(file)) say(`\n${readFileSync(file, 'utf8').trim()}`)
}

try {
  const context = await prepare('npm start')
  await ensureBuilt()
  say('Starting the server …')
  const log = path.join(context.folder, 'server.log')
  const { child, url } = await startServer(context.env, log)
  child.once('exit', (code, signal) => {
    if (isEnding()) return
    say(`The server ended by itself (${signal ?? `exit code ${code}`}). Its log (${path.relative(root, log)}) says:\n${lastLogLines(log)}\n\nNothing that was filed is lost. Start again with npm start.`)
    void endEverything(1)
  })
  if (context.demo) await seedDemo(context, url)
  if (!isEnding()) {
    context.lock.note({ url })
    say(`\nLull is ready at ${url}`)
    if (context.demo) await printSignIns(context)
    else printFirstInvitation(context)
    say(`\nThe server writes its log to ${path.relative(process.cwd(), log)}. Ctrl-C ends Lull.`)
  }
}
catch (error) {
  await fail(error)
}
