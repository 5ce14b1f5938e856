#!/usr/bin/env node
/** `npm run dev`: the same database and settings as start, with Nuxt's development server. */
import { spawn } from 'node:child_process'
import path from 'node:path'
import { root, say } from './lib/system.mjs'
import { endChild, endCleanly, fail, prepare } from './lib/serve.mjs'

try {
  const parts = []
  const end = endCleanly(parts)
  const context = await prepare()
  parts.push(context.database.stop)
  say(`Development server at ${context.url}`)
  const child = spawn(process.execPath, [path.join(root, 'node_modules', 'nuxt', 'bin', 'nuxt.mjs'), 'dev', '--host', context.host, '--port', String(context.port)], {
    cwd: root, stdio: 'inherit', env: { ...process.env, ...context.env },
  })
  parts.unshift(() => endChild(child))
  child.once('exit', code => void end(code ?? 1))
}
catch (error) {
  fail(error)
}
