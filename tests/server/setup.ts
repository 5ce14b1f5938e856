/** Starts the built server once for all tests of this project, on a MariaDB with throw-away data. */
import path from 'node:path'
import type { TestProject } from 'vitest/node'
import { ensureBuilt } from '../../scripts/lib/server.mjs'
import { root } from '../../scripts/lib/system.mjs'
import { startTestServer } from '../../scripts/lib/test-server.mjs'

export interface TestServer { url: string, databaseUrl: string, folder: string, log: string }

declare module 'vitest' {
  interface ProvidedContext { lull: TestServer }
}

export default async function setup(project: TestProject) {
  await ensureBuilt()
  const stops: (() => Promise<void>)[] = []
  const server = await startTestServer(path.join(root, '.data-test', 'server'), { onStart: (stop: () => Promise<void>) => stops.push(stop) })
  const { url, databaseUrl, folder, log } = server
  project.provide('lull', { url, databaseUrl, folder, log })
  return async () => {
    await server.stop()
    for (const stop of stops) await stop()
  }
}
