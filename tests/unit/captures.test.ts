/** The capture files that other tests use are what they say: each opens with its frames, or is refused with its reason. */
import { mkdtemp, readFile, rm } from 'node:fs/promises'
import { tmpdir } from 'node:os'
import { basename, extname, join } from 'node:path'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { decoders } from '../../workers/decode/registry'
import { openCapture } from '../../workers/decode/index'
import { CaptureError } from '../../workers/decode/types'
import { memorySource } from '../../workers/source/memory'
import { doubleFrames, writeCaptures, type CaptureFixture } from '../fixtures/captures'

describe('capture fixtures', () => {
  let folder = ''
  let fixtures: CaptureFixture[] = []
  const open = async ({ files }: CaptureFixture) => openCapture(basename(files[0]!), await Promise.all(files.map(async name => memorySource(basename(name), new Uint8Array(await readFile(join(folder, name)))))))

  /** Fixtures of formats that this build has a decoder for; what belongs to none must be refused by any build. */
  const decoded = ({ key, files }: CaptureFixture) => key === 'unknown format' || decoders.some(({ extensions }) => extensions.includes(extname(files[0]!).slice(1)))

  beforeAll(async () => {
    folder = await mkdtemp(join(tmpdir(), 'captures-'))
    fixtures = await writeCaptures(folder)
  }, 60_000)
  afterAll(() => rm(folder, { recursive: true, force: true }))

  it('open with all their frames, the same through every format', async () => {
    const truth = await doubleFrames(12)
    const good = fixtures.filter(fixture => fixture.problem === null && decoded(fixture))
    expect(good.length).toBeGreaterThanOrEqual(4)
    for (const fixture of good) {
      const reader = await open(fixture)
      expect(reader.facts.frameCount, fixture.key).toBe(fixture.frames)
      expect([reader.facts.width, reader.facts.height], fixture.key).toEqual([96, 96])
      if (fixture.frames !== 12) continue
      const { samples } = await reader.readFrames(7, 1)
      expect(Array.from(samples), fixture.key).toEqual(Array.from(truth.samples.subarray(7 * 96 * 96, 8 * 96 * 96)))
    }
  })

  it('are refused with the reason that they were made for', async () => {
    for (const fixture of fixtures.filter(fixture => fixture.problem !== null && decoded(fixture))) {
      const reason = await open(fixture).then(() => null, (error: unknown) => error)
      expect(reason, fixture.key).toBeInstanceOf(CaptureError)
      expect((reason as CaptureError).code, fixture.key).toBe(fixture.problem)
    }
  })
})
