#!/usr/bin/env node
/**
 * `npm test`: installs what is missing and runs everything, against a database of its own with throw-away data.
 * `npm test -- unit server` runs only the named stages: types, lint, unit, reference, server, browser.
 */
import { existsSync, mkdirSync, readdirSync, readFileSync, rmSync } from 'node:fs'
import path from 'node:path'
import { endLeftovers, markChildren, run } from './lib/children.mjs'
import { browserPackages, databasePackages, ensureNodeModules, ensurePackages } from './lib/install.mjs'
import { lockFolder } from './lib/lock.mjs'
import { stopDatabaseOf } from './lib/mariadb.mjs'
import { atEnd, endEverything, endOnSignals, fail, isEnding } from './lib/serve.mjs'
import { ensureBuilt } from './lib/server.mjs'
import { requireNode, root, say } from './lib/system.mjs'
import { startTestServer } from './lib/test-server.mjs'

const folder = path.join(root, '.data-test')
const binary = name => path.join(root, 'node_modules', '.bin', name)
const sum = { passed: 0, failed: 0, skipped: 0, troubles: [] }

function count(stage, passed, failed, skipped = 0) {
  sum.passed += passed
  sum.failed += failed
  sum.skipped += skipped
  if (failed) sum.troubles.push(`${stage}: ${failed} failed`)
  say(`— ${stage}: ${passed} passed, ${failed} failed${skipped ? `, ${skipped} skipped` : ''}\n`)
}

/** A whole program that passes or fails counts as one. */
async function check(stage, program, args, env = process.env) {
  const { code } = await run(program, args, { show: true, env })
  count(stage, code === 0 ? 1 : 0, code === 0 ? 0 : 1)
}

function readReport(file) {
  try {
    return JSON.parse(readFileSync(file, 'utf8'))
  }
  catch {
    return null
  }
}

/** One project of Vitest. A project that cannot even be started, or a file that cannot be loaded, is a failure. */
async function vitest(project, env = process.env) {
  const file = path.join(folder, 'reports', `${project}.json`)
  const { code } = await run(binary('vitest'), ['run', '--project', project, '--reporter=default', '--reporter=json', `--outputFile.json=${file}`], { show: true, env: { ...env, CI: '1' } })
  const report = readReport(file)
  const broken = (report?.testResults ?? []).filter(({ status, assertionResults }) => status === 'failed' && !assertionResults.some(one => one.status === 'failed')).length
  const failed = (report?.numFailedTests ?? 0) + broken
  count(project, report?.numPassedTests ?? 0, failed === 0 && code !== 0 ? 1 : failed, report?.numPendingTests ?? 0)
}

const hasTests = name => existsSync(path.join(root, 'tests', name)) && readdirSync(path.join(root, 'tests', name), { recursive: true }).some(file => /\.(test|spec)\.ts$/.test(file))

/** The browser's tests, against the production build with the demo in it. */
async function browser() {
  if (!hasTests('browser')) return
  await ensurePackages(browserPackages)
  const server = await startTestServer(path.join(folder, 'browser'), { demo: true, onStart: atEnd })
  say(`Seeding the demo at ${server.url} …`)
  const env = { ...process.env, ...server.env, LULL_BASE_URL: server.url }
  const seeded = await run(process.execPath, [binary('tsx'), path.join(root, 'scripts', 'seed', 'index.ts')], { show: true, env })
  if (seeded.code !== 0) count('demo', 0, 1)
  const file = path.join(folder, 'reports', 'browser.json')
  const { code } = await run(binary('playwright'), ['test', '--reporter=list,json'], { show: true, env: { ...env, CI: '1', PLAYWRIGHT_JSON_OUTPUT_FILE: file, PLAYWRIGHT_JSON_OUTPUT_NAME: file } })
  const stats = readReport(file)?.stats
  const failed = stats?.unexpected ?? 0
  count('browser', (stats?.expected ?? 0) + (stats?.flaky ?? 0), failed === 0 && code !== 0 ? 1 : failed, stats?.skipped ?? 0)
  await server.stop()
}

const stages = {
  types: async () => {
    await run(binary('nuxt'), ['prepare'], { env: { ...process.env, NUXT_TELEMETRY_DISABLED: '1' } })
    await check('types', binary('vue-tsc'), ['-b', '--noEmit'])
  },
  lint: () => check('lint', binary('eslint'), ['.', '--max-warnings', '0']),
  unit: () => vitest('unit'),
  reference: async () => { if (hasTests('reference')) await vitest('reference') },
  server: async () => {
    await ensureBuilt()
    await vitest('server')
  },
  browser: async () => {
    await ensureBuilt()
    await browser()
  },
}

try {
  requireNode()
  const wanted = process.argv.slice(2)
  const unknown = wanted.filter(name => !Object.hasOwn(stages, name))
  if (unknown.length) {
    say(`There is no stage "${unknown[0]}". Stages: ${Object.keys(stages).join(', ')}.`)
    process.exit(2)
  }
  const lock = await lockFolder(folder, 'npm test')
  atEnd(() => lock.release())
  endOnSignals(() => lock.note({ ending: true }))
  // What an earlier, killed test run left: its programs, its servers, its databases and their data.
  await endLeftovers(folder)
  markChildren(folder)
  await ensurePackages(databasePackages)
  await ensureNodeModules()
  for (const name of ['server', 'browser']) {
    await endLeftovers(path.join(folder, name))
    await stopDatabaseOf(path.join(folder, name))
    rmSync(path.join(folder, name), { recursive: true, force: true })
  }
  mkdirSync(path.join(folder, 'reports'), { recursive: true })
  for (const [name, stage] of Object.entries(stages)) {
    if (isEnding() || (wanted.length && !wanted.includes(name))) continue
    say(`— ${name} …`)
    try {
      await stage()
    }
    catch (error) {
      say(error.message)
      count(name, 0, 1)
    }
  }
  if (!isEnding()) {
    for (const name of ['server', 'browser']) rmSync(path.join(folder, name), { recursive: true, force: true })
    for (const trouble of sum.troubles) say(trouble)
    if (sum.skipped) say(`${sum.skipped} skipped`)
    say(`${sum.passed} passed, ${sum.failed} failed`)
    await endEverything(sum.failed === 0 && sum.passed > 0 ? 0 : 1)
  }
}
catch (error) {
  await fail(error)
}
