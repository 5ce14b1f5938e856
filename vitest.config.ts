import { fileURLToPath } from 'node:url'
import { defineConfig } from 'vitest/config'

const root = fileURLToPath(new URL('.', import.meta.url))

/** `unit` needs nothing but Node; `reference` also fetches Debian packages; `server` a built server and MariaDB. */
export default defineConfig({
  resolve: { alias: { '~': root.replace(/\/$/, ''), '~~': root.replace(/\/$/, '') } },
  test: {
    projects: [
      { extends: true, test: { name: 'unit', include: ['tests/unit/**/*.test.ts'], environment: 'node' } },
      { extends: true, test: { name: 'reference', include: ['tests/reference/**/*.test.ts'], environment: 'node', testTimeout: 120_000, hookTimeout: 300_000 } },
      { extends: true, test: { name: 'server', include: ['tests/server/**/*.test.ts'], environment: 'node', testTimeout: 30_000, hookTimeout: 120_000, fileParallelism: false, globalSetup: ['tests/server/setup.ts'] } },
    ],
  },
})
