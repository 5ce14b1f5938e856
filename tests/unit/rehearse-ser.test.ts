import { crc32 } from 'node:zlib'
import { describe, expect, it } from 'vitest'
import { demoScenes } from '../../workers/rehearse/demos'
import { rehearsalReader } from '../../workers/rehearse/reader'
import { rehearsalSer } from '../../workers/rehearse/ser'

describe('a rehearsal as a SER file', () => {
  it('has the header, the frames and the trailer of the published description', async () => {
    for (const demo of [demoScenes.double, { ...demoScenes.triple, detector: { ...demoScenes.triple.detector, mosaic: 'RGGB' as const } }]) {
      const spec = { ...demo, width: 40, height: 32, frames: 5, dropShare: 0.3 }
      const file = rehearsalSer(spec, { observer: 'A. Keeper', instrument: 'ü', telescope: 'T'.repeat(60) })
      const view = new DataView(file.buffer)
      const wide = spec.detector.bitDepth > 8
      const frameBytes = 40 * 32 * (wide ? 2 : 1)
      expect(file.length).toBe(178 + 5 * frameBytes + 5 * 8)
      // CRC-32 of the identifier, from a published file.
      expect(crc32(file.subarray(0, 14)).toString(16)).toBe('aa30a120')
      expect([14, 18, 22, 26, 30, 34, 38].map(at => view.getInt32(at, true))).toEqual([0, wide ? 0 : 8, 1, 40, 32, spec.detector.bitDepth, 5])
      const text = (at: number) => new TextDecoder().decode(file.subarray(at, at + 40)).replace(/\0+$/, '')
      expect([42, 82, 122].map(text)).toEqual(['A. Keeper', '?', 'T'.repeat(40)])
      const reader = await rehearsalReader(spec)
      const { samples } = await reader.readFrames(0, 5)
      const at = 178 + 3 * frameBytes + 17 * (wide ? 2 : 1)
      expect(wide ? view.getUint16(at, true) : file[at]).toBe(samples[3 * 40 * 32 + 17])
      // 2026-01-01 is 639028224000000000 ticks.
      const since = Number(view.getBigInt64(file.length - 8, true) - 639028224000000000n) / 1e7
      expect(since).toBeCloseTo((Date.parse(spec.start) - Date.UTC(2026, 0, 1)) / 1000 + reader.seconds![4]!, 5)
    }
  })
})
