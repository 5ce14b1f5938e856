#!/usr/bin/env node
/** `npm run dev`: the same database and settings as start, with Nuxt's development server. */
import { spawn } from 'node:child_process'
import path from 'node:path'
import { follow } from './lib/children.mjs'
import { endEverything, fail, prepare } from './lib/serve.mjs'
import { callable } from './lib/server.mjs'
import { root, say } from './lib/system.mjs'

try {
  const context = await prepare('npm run dev')
  const url = `http://${callable(context.host)}:${context.port}`
  say(`Development server at ${url}. The demo's runs come with: LULL_BASE_URL=${url} NUXT_DATABASE_URL=${context.database.url} npx tsx scripts/seed/index.ts`)
  context.lock.note({ url })
  const child = follow(spawn(process.execPath, [path.join(root, 'node_modules', 'nuxt', 'bin', 'nuxt.mjs'), 'dev', '--host', context.host, '--port', String(context.port)], {
    cwd: root, stdio: ['ignore', 'inherit', 'inherit'], env: { ...process.env, ...context.env }, detached: true,
  }))
  child.once('exit', code => void endEverything(code ?? 1))
}
catch (error) {
  await fail(error)
}
