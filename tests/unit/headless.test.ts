import { execFile } from 'node:child_process'
import { mkdir, mkdtemp, readdir, readFile, rm, writeFile } from 'node:fs/promises'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { runResultSchema } from '../../shared/schemas/run'
import { cubeLayout, decodeCubeFrame } from '../../workers/encode/fits'
import { serHeader } from '../../workers/rehearse/index'
import { movingDouble } from './support/moving-double'

const capture = movingDouble({ frames: 120, width: 64, height: 56 })
const names = { observer: '', instrument: '', telescope: '' }
let folder = ''
let file = ''

/** Runs the command as a user does; resolves with its exit code and what it said. */
function headless(...args: string[]): Promise<{ code: number, out: string, err: string }> {
  return new Promise((resolve) => {
    execFile(process.execPath, ['node_modules/tsx/dist/cli.mjs', 'scripts/headless.ts', ...args], (error, out, err) => {
      resolve({ code: error ? Number(error.code) : 0, out, err })
    })
  })
}

async function image(name: string): Promise<Float32Array> {
  const bytes = await readFile(join(folder, name))
  const layout = cubeLayout(bytes)!
  return decodeCubeFrame(bytes.subarray(layout.dataOffset), layout)
}

beforeAll(async () => {
  folder = await mkdtemp(join(tmpdir(), 'lull-headless-'))
  file = join(folder, 'double.ser')
  const { width, height, frameCount } = capture.facts
  const header = serHeader({ width, height, frames: frameCount, bitDepth: 16, mosaic: 'none', startMs: Date.UTC(2026, 10, 14, 21), names })
  await writeFile(file, Buffer.concat([header, new Uint8Array(capture.samples.buffer)]))
})
afterAll(() => rm(folder, { recursive: true, force: true }))

describe('the headless command', () => {
  it('writes a stack that is sharper than the unregistered average, and the whole story of it', async () => {
    const done = await headless(file, '--out', join(folder, 'out'), '--keep', '0.1')
    expect(done).toEqual({ code: 0, out: '', err: '' })
    expect((await readdir(join(folder, 'out'))).sort()).toEqual(['average.fits', 'frames.csv', 'result.json', 'stack.fits'])

    const result = JSON.parse(await readFile(join(folder, 'out/result.json'), 'utf8')) as Record<string, unknown>
    const parsed = runResultSchema.parse(result)
    expect(parsed.keep).toEqual({ fraction: 0.1, count: 12 })
    expect(parsed.ranked).toBe(120)
    expect(parsed.figures.sharpness).toBeGreaterThan(2 * parsed.average.sharpness)
    expect(Object.keys(result.timings as object).sort()).toEqual(['grade', 'ladder', 'proofs', 'refine', 'survey'])

    const stack = await image('out/stack.fits')
    const average = await image('out/average.fits')
    const size = 64 * 56
    for (const i of [5 * 64 + 9, 700, size - 1]) {
      let sum = 0
      for (let k = 0; k < 120; k++) sum += capture.samples[k * size + i]!
      expect(average[i]).toBe(Math.fround(sum / 120))
    }
    const top = (data: Float32Array) => data.reduce((most, value, i) => i === 5 * 64 + 9 ? most : Math.max(most, value), 0)
    expect(top(stack)).toBeGreaterThan(1.3 * top(average))

    const lines = (await readFile(join(folder, 'out/frames.csv'), 'utf8')).trimEnd().split('\n')
    expect(lines[0]).toBe('frame,score,laplacian,peak,x,y,dx,dy,rank,kept')
    expect(lines.length).toBe(121)
    const rows = lines.slice(1).map(line => line.split(','))
    expect(rows.map(row => Number(row[0]))).toEqual(Array.from({ length: 120 }, (_, i) => i))
    expect(rows.filter(row => row[9] === '1').map(row => Number(row[8])).sort((a, b) => a - b)).toEqual(Array.from({ length: 12 }, (_, i) => i + 1))
  }, 30_000)

  it('gives the same bytes with two threads', async () => {
    for (const [workers, out] of [['1', 'one'], ['2', 'two']] as const) {
      expect(await headless(file, '--out', join(folder, out), '--workers', workers)).toEqual({ code: 0, out: '', err: '' })
    }
    for (const name of ['stack.fits', 'average.fits', 'frames.csv']) {
      expect((await readFile(join(folder, 'one', name))).equals(await readFile(join(folder, 'two', name)))).toBe(true)
    }
  }, 30_000)

  it.each([
    ['a file that is not there', ['gone.ser', '--out', 'X'], /no (file or folder|capture)/i],
    ['an empty file', ['empty.ser', '--out', 'X'], /empty/],
    ['a keep fraction out of range', ['double.ser', '--out', 'X', '--keep', '7'], /keep\.fraction/],
    ['a setting that no recipe has', ['double.ser', '--out', 'X', '--set', 'keep.share=0.1'], /no value called "keep\.share"/],
    ['a recipe that is not JSON', ['double.ser', '--out', 'X', '--recipe', 'empty.ser'], /not JSON/],
    ['no capture', ['--out', 'X'], /Name one capture/],
    ['no place for the results', ['double.ser'], /--out/],
    ['a file where the results should go', ['double.ser', '--out', 'empty.ser'], /is a file/],
    ['frames without a target', ['blank.ser', '--out', 'X'], /None of the 12 frames can be used/],
  ] as const)('answers %s with one line and code 2, and writes nothing', async (_what, args, message) => {
    await writeFile(join(folder, 'empty.ser'), '')
    const header = serHeader({ width: 64, height: 56, frames: 12, bitDepth: 8, mosaic: 'none', startMs: 0, names })
    await writeFile(join(folder, 'blank.ser'), Buffer.concat([header, new Uint8Array(12 * 64 * 56)]))
    await mkdir(folder, { recursive: true })
    const before = (await readdir(folder)).sort()
    const placed = args.map(arg => /^(X|[a-z]+\.ser)$/.test(arg) ? join(folder, arg) : arg)
    const { code, out, err } = await headless(...placed)
    expect(err).toMatch(message)
    expect(err.trimEnd().split('\n').length).toBe(1)
    expect({ code, out }).toEqual({ code: 2, out: '' })
    expect((await readdir(folder)).sort()).toEqual(before)
  }, 20_000)
})
