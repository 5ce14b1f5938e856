// Compiles workers/kernels/assembly into workers/kernels/binary.ts: node scripts/build-kernels.mjs [--check]
// The result is committed, so that building and running Lull needs no compiler; --check fails when it is stale.
import { execFileSync } from 'node:child_process'
import { mkdtempSync, readFileSync, rmSync, writeFileSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { fileURLToPath } from 'node:url'

const root = fileURLToPath(new URL('..', import.meta.url))
const target = join(root, 'workers/kernels/binary.ts')
const folder = mkdtempSync(join(tmpdir(), 'lull-kernels-'))
const built = join(folder, 'kernels.wasm')
execFileSync(process.execPath, [
  join(root, 'node_modules/assemblyscript/bin/asc.js'), join(root, 'workers/kernels/assembly/index.ts'),
  '-O3', '--noAssert', '--enable', 'simd', '--enable', 'bulk-memory', '--runtime', 'stub', '--importMemory', '-o', built,
], { stdio: 'inherit' })
const base64 = readFileSync(built).toString('base64')
rmSync(folder, { recursive: true })
const text = `// Made by scripts/build-kernels.mjs from workers/kernels/assembly; do not edit.\nexport const kernelBinary = '${base64}'\n`
if (process.argv.includes('--check')) {
  if (readFileSync(target, 'utf8') !== text) {
    console.error('workers/kernels/binary.ts is stale: run node scripts/build-kernels.mjs.')
    process.exit(1)
  }
}
else writeFileSync(target, text)
