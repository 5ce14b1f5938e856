/**
 * Programs and libraries of Debian for checks against the outside: packages are downloaded by apt and unpacked into the tests' cache,
 * never installed. A package that this machine's release lacks is named, so that the test can be skipped with that reason.
 */
import { execFileSync } from 'node:child_process'
import { existsSync, mkdirSync, readdirSync, renameSync, rmSync } from 'node:fs'
import path from 'node:path'
import { fileURLToPath } from 'node:url'

const cache = fileURLToPath(new URL('../../../.data-test/packages', import.meta.url))

export type Unpacked = { root: string, missing: null } | { root: null, missing: string }

/** Unpacks packages side by side under one root; `name` is the cache's folder for this set. */
export function unpacked(name: string, packages: readonly string[]): Unpacked {
  const root = path.join(cache, name)
  if (existsSync(root)) return { root, missing: null }
  mkdirSync(cache, { recursive: true })
  const work = path.join(cache, `${name}.${process.pid}`)
  rmSync(work, { recursive: true, force: true })
  mkdirSync(path.join(work, 'root'), { recursive: true })
  try {
    for (const each of packages) {
      try {
        execFileSync('apt-get', ['download', '-qq', each], { cwd: work, stdio: 'pipe' })
      }
      catch (error) {
        return { root: null, missing: `${each} cannot be fetched: ${String((error as { stderr?: Buffer }).stderr ?? error).trim().split('\n').pop()}` }
      }
    }
    for (const file of readdirSync(work).filter(each => each.endsWith('.deb'))) execFileSync('dpkg', ['-x', path.join(work, file), path.join(work, 'root')])
    renameSync(path.join(work, 'root'), root)
    return { root, missing: null }
  }
  finally {
    rmSync(work, { recursive: true, force: true })
  }
}

const scientific = [
  'python3-numpy', 'python3-scipy', 'python3-skimage', 'python3-skimage-lib', 'python3-pywt', 'python3-six', 'python3-packaging', 'python3-imageio',
  'python3-pil', 'python3-tifffile', 'python3-networkx', 'python3-decorator', 'python3-pkg-resources', 'python3-lazy-loader',
  'libblas3', 'liblapack3', 'libgfortran5', 'libquadmath0', 'liblbfgsb0',
]

/** Runs a script with NumPy, SciPy and scikit-image of Debian and returns what it prints; null with the reason where they are not to be had. */
export function runPython(script: string, input: string): { output: string, missing: null } | { output: null, missing: string } {
  const { root, missing } = unpacked('scientific-python', scientific)
  if (root === null) return { output: null, missing }
  const libraries = path.join(root, 'usr/lib', `${process.arch === 'arm64' ? 'aarch64' : 'x86_64'}-linux-gnu`)
  const output = execFileSync('/usr/bin/python3', [script], {
    input, maxBuffer: 2 ** 28, encoding: 'utf8',
    env: { ...process.env, PYTHONPATH: path.join(root, 'usr/lib/python3/dist-packages'), LD_LIBRARY_PATH: [libraries, path.join(libraries, 'blas'), path.join(libraries, 'lapack')].join(':'), OPENBLAS_NUM_THREADS: '1' },
  })
  return { output, missing: null }
}
