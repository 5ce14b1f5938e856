#!/usr/bin/env node
/** `npm start`: from a bare machine to a running Lull. Needs nothing but Node; see README.md. */
import { spawn } from 'node:child_process'
import path from 'node:path'
import { root, say, SetupError } from './lib/system.mjs'
import { endChild, endCleanly, fail, prepare, seedScript } from './lib/serve.mjs'
import { ensureBuilt, startServer } from './lib/server.mjs'

async function seed(context) {
  const script = seedScript()
  if (!script || !context.demo) return
  const child = spawn(process.execPath, [path.join(root, 'node_modules', 'tsx', 'dist', 'cli.mjs'), script], {
    cwd: root, stdio: 'inherit', env: { ...process.env, ...context.env, LULL_BASE_URL: context.url },
  })
  const code = await new Promise(resolve => child.once('exit', resolve))
  if (code !== 0) say('The demo is not complete; the next start goes on with it. Lull itself works.')
}

async function printSignIns() {
  const { readFileSync } = await import('node:fs')
  const source = readFileSync(path.join(root, 'shared', 'demo.ts'), 'utf8')
  say('\nDemo sign-ins:')
  for (const [, email, , role, password] of source.matchAll(/email: '([^']+)', name: '([^']+)', role: '([^']+)', password: '([^']+)'/g)) {
    say(`  ${role.padEnd(10)} ${email.padEnd(26)} ${password}`)
  }
}

try {
  const parts = []
  endCleanly(parts)
  const context = await prepare()
  parts.push(context.database.stop)
  ensureBuilt()
  const { child, url } = await startServer(context.env)
  parts.unshift(() => endChild(child))
  child.once('exit', (code, signal) => {
    if (child.killed) return
    say(`The server ended by itself (${signal ?? code}).`)
    void context.database.stop().then(() => process.exit(1))
  })
  await seed(context)
  say(`Lull is ready at ${url}`)
  if (context.demo) await printSignIns()
}
catch (error) {
  fail(error instanceof Error ? error : new SetupError(String(error)))
}
