/**
 * PNG and TIFF files that nobody here made (Debian's packages of Go and of its image library) against second decoders:
 * fast-png and utif2. Fetched once into the test cache, unpacked, never installed.
 */
import { execFile } from 'node:child_process'
import { mkdir, readdir, readFile, stat } from 'node:fs/promises'
import path from 'node:path'
import { promisify } from 'node:util'
import { decode as decodePng } from 'fast-png'
import UTIF from 'utif2'
import { beforeAll, describe, expect, it } from 'vitest'
import { openCapture } from '../../../workers/decode/index'
import type { CaptureError } from '../../../workers/decode/types'
import { memorySource } from '../../../workers/source/memory'

const run = promisify(execFile)
const cache = path.resolve('.data-test/debian')

/** The unpacked folder of a package; null, with the reason, where this machine's release does not carry it. */
async function unpacked(name: string): Promise<{ folder: string } | { reason: string }> {
  const folder = path.join(cache, name)
  if (await stat(folder).catch(() => null)) return { folder }
  await mkdir(cache, { recursive: true })
  try {
    await run('apt-get', ['download', name], { cwd: cache, timeout: 120_000 })
  }
  catch (error) {
    return { reason: `The package ${name} cannot be had here: ${String((error as { stderr?: string }).stderr ?? error).trim().split('\n').at(-1)}` }
  }
  const file = (await readdir(cache)).find(entry => entry.startsWith(`${name}_`) && entry.endsWith('.deb'))!
  await run('dpkg', ['-x', file, `${name}.part`], { cwd: cache, timeout: 120_000 })
  await run('mv', [`${name}.part`, name], { cwd: cache })
  return { folder }
}

async function samplesOf(name: string, bytes: Uint8Array) {
  const reader = await openCapture(name, [memorySource(name, bytes)])
  const { samples } = await reader.readFrames(0, 1)
  return { facts: reader.facts, samples }
}

describe('PNG suite of Go 1.19 (image/png/testdata/pngsuite)', () => {
  let place: Awaited<ReturnType<typeof unpacked>>
  beforeAll(async () => {
    place = await unpacked('golang-1.19-src')
  })
  it('is read as fast-png reads it', async ({ skip }) => {
    if ('reason' in place) return skip(place.reason)
    const folder = path.join(place.folder, 'usr/share/go-1.19/src/image/png/testdata/pngsuite')
    const names = (await readdir(folder)).filter(name => name.endsWith('.png'))
    expect(names.length).toBeGreaterThan(20)
    const compared: string[] = []
    const interlaced: string[] = []
    for (const name of names) {
      const bytes = new Uint8Array(await readFile(path.join(folder, name)))
      const { facts, samples } = await samplesOf(name, bytes)
      // fast-png does not read interlaced images of less than a byte a sample (byte 28 is the interlace method, byte 24 the depth).
      if (bytes[28] === 1 && bytes[24]! < 8) {
        interlaced.push(name)
        continue
      }
      const theirs = decodePng(bytes)
      expect([facts.width, facts.height], name).toEqual([theirs.width, theirs.height])
      const palette = theirs.palette
      // fast-png leaves samples of less than a byte packed.
      if (theirs.depth < 8) continue
      const pixels = theirs.width * theirs.height
      const expected = new Array<number>(pixels * facts.planes)
      for (let i = 0; i < pixels; i++) {
        for (let p = 0; p < facts.planes; p++) expected[p * pixels + i] = palette ? palette[theirs.data[i]!]![p]! : theirs.data[i * theirs.channels + p]!
      }
      expect(Array.from(samples), name).toEqual(expected)
      compared.push(name)
    }
    expect(compared.length, `compared: ${compared.join(', ')}; not compared: ${interlaced.join(', ')}`).toBeGreaterThan(8)
  })
})

describe('TIFF files of Go\'s image library (testdata)', () => {
  let place: Awaited<ReturnType<typeof unpacked>>
  beforeAll(async () => {
    place = await unpacked('golang-golang-x-image-dev')
  })
  it('are read as utif2 reads them, and fax is refused', async ({ skip }) => {
    if ('reason' in place) return skip(place.reason)
    const folder = path.join(place.folder, 'usr/share/gocode/src/golang.org/x/image/testdata')
    const names = (await readdir(folder)).filter(name => name.endsWith('.tiff'))
    let compared = 0
    for (const name of names) {
      const bytes = new Uint8Array(await readFile(path.join(folder, name)))
      if (name.includes('ccitt')) {
        await expect(samplesOf(name, bytes), name).rejects.toMatchObject({ code: 'unsupported-compression' } satisfies Partial<CaptureError>)
        continue
      }
      const { facts, samples } = await samplesOf(name, bytes)
      const [page] = UTIF.decode(bytes.buffer)
      UTIF.decodeImage(bytes.buffer, page!)
      const rgba = UTIF.toRGBA8(page!)
      const pixels = facts.width * facts.height
      expect(rgba.length, name).toBe(4 * pixels)
      // utif2 shows 8 bits: the upper byte of 16, full range for one bit.
      const shown = (value: number) => (facts.bitDepth === 16 ? value >> 8 : facts.bitDepth === 1 ? 255 * value : value)
      for (let i = 0; i < pixels; i++) {
        for (let p = 0; p < 3; p++) if (shown(samples[(facts.planes === 3 ? p * pixels : 0) + i]!) !== rgba[4 * i + p]) throw new Error(`${name}: pixel ${i}, plane ${p}: ${samples[(facts.planes === 3 ? p * pixels : 0) + i]} here, ${rgba[4 * i + p]} there`)
      }
      compared++
    }
    expect(compared).toBeGreaterThan(10)
  })
})
