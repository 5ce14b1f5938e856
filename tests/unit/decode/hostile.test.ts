/** Files that are damaged or made to harm: a typed error or frames of the declared size, and never a hang. */
import { deflateSync } from 'node:zlib'
import { encode as encodeJpeg } from 'jpeg-js'
import { describe, expect, it } from 'vitest'
import { openCapture } from '../../../workers/decode/index'
import { CaptureError } from '../../../workers/decode/types'
import { unpackLzw, unpackPackBits } from '../../../workers/decode/tiff/unpack'
import { memorySource } from '../../../workers/source/memory'
import { serHeader } from '../../../workers/rehearse/index'
import { aviFile } from '../../fixtures/avi'
import { fitsCube, pngFrame, tiffPages, type Frames } from '../../fixtures/captures'
import { uniformFrom } from '../support/moving-double'

const frames: Frames = { width: 8, height: 6, count: 3, samples: Uint16Array.from({ length: 8 * 6 * 3 }, (_, i) => (i * 997) % 4096) }

function ser(): Uint8Array {
  const header = serHeader({ width: 8, height: 6, bitDepth: 16, frames: 3, mosaic: 'none', startMs: Date.UTC(2031, 2, 4), names: { observer: '', instrument: '', telescope: '' } })
  const file = new Uint8Array(header.length + frames.samples.length * 2 + 24)
  file.set(header)
  file.set(new Uint8Array(frames.samples.buffer), header.length)
  const view = new DataView(file.buffer)
  // Ticks of 100 ns since the year 1; 2026-01-01 is 639028224000000000.
  for (let i = 0; i < 3; i++) view.setBigUint64(header.length + frames.samples.length * 2 + 8 * i, 639_028_224_000_000_000n + BigInt(i) * 200_000n, true)
  return file
}

/** Codes of 9 bits with a clear code often enough that they stay so (TIFF 6.0, section 13). */
function lzwOf(bytes: Uint8Array): Uint8Array {
  const codes = [256]
  bytes.forEach((byte, i) => codes.push(byte, ...(i % 200 === 199 ? [256] : [])))
  codes.push(257)
  const bits = codes.map(code => code.toString(2).padStart(9, '0')).join('')
  return Uint8Array.from({ length: Math.ceil(bits.length / 8) }, (_, i) => parseInt(bits.slice(8 * i, 8 * i + 8).padEnd(8, '0'), 2))
}

/** A TIFF of one page with given compressed bytes. */
function packedTiff({ compression, data, width = 8, height = 6, bits = 16, photometric = 1 }: { compression: number, data: Uint8Array, width?: number, height?: number, bits?: number, photometric?: number }): Uint8Array {
  const entries = [[256, 4, width], [257, 4, height], [258, 3, bits], [259, 3, compression], [262, 3, photometric], [273, 4, 8], [277, 3, 1], [278, 4, height], [279, 4, data.length]] as const
  const at = 8 + data.length + data.length % 2
  const file = new Uint8Array(at + 2 + 12 * entries.length + 4)
  const view = new DataView(file.buffer)
  file.set([0x49, 0x49, 42, 0])
  view.setUint32(4, at, true)
  file.set(data, 8)
  view.setUint16(at, entries.length, true)
  entries.forEach(([tag, type, value], i) => {
    view.setUint16(at + 2 + 12 * i, tag, true)
    view.setUint16(at + 4 + 12 * i, type, true)
    view.setUint32(at + 6 + 12 * i, 1, true)
    view.setUint32(at + 10 + 12 * i, value, true)
  })
  return file
}
const raw = new Uint8Array(frames.samples.slice(0, 48).buffer)

const files: Record<string, Uint8Array> = {
  'a.ser': ser(), 'a.fits': fitsCube(frames), 'a.tif': tiffPages(frames), 'a.png': pngFrame(frames, 0),
  'lzw.tif': packedTiff({ compression: 5, data: lzwOf(raw) }), 'deflate.tif': packedTiff({ compression: 8, data: deflateSync(raw) }),
  'a.avi': aviFile({ width: 8, height: 6, bits: 8, frames: [0, 1, 2].map(i => new Uint8Array(raw.subarray(i, i + 48))), index: 'opendml' }),
  'a.jpg': new Uint8Array(encodeJpeg({ width: 8, height: 6, data: new Uint8Array(8 * 6 * 4).map((_, i) => (i * 7) & 255) }, 90).data),
}

/** Opens and reads everything; the error's code, or the number of frames. Anything but a CaptureError is thrown on. */
async function outcome(name: string, bytes: Uint8Array): Promise<string | number> {
  try {
    const reader = await openCapture(name, [memorySource(name, Uint8Array.from(bytes))])
    const { width, height, planes, frameCount } = reader.facts
    for (let i = 0; i < Math.min(frameCount, 4); i++) {
      const { samples } = await reader.readFrames(i, 1)
      if (samples.length !== width * height * planes) throw new Error(`${samples.length} samples in a frame of ${width} × ${height} × ${planes}`)
    }
    reader.close()
    return frameCount
  }
  catch (reason) {
    if (reason instanceof CaptureError) return reason.code
    throw reason
  }
}

describe('every beginning of a file', () => {
  it.each(Object.keys(files))('of %s is refused or gives whole frames', async (name) => {
    const whole = await outcome(name, files[name]!)
    expect(whole).toBeGreaterThan(0)
    let refused = 0
    for (let length = 0; length < files[name]!.length; length++) {
      const found = await outcome(name, files[name]!.subarray(0, length))
      if (typeof found === 'string') refused++
      else expect(found, `${name} of ${length} bytes`).toBeLessThanOrEqual(whole as number)
    }
    expect(refused).toBeGreaterThan(0)
  }, 60_000)
})

describe('flipped bytes', () => {
  it.each(Object.keys(files))('of %s are refused or give whole frames', async (name) => {
    const uniform = uniformFrom(name.length * 7919 + name.charCodeAt(0))
    const good = files[name]!
    for (let trial = 0; trial < 1700; trial++) {
      const bad = Uint8Array.from(good)
      for (let flips = 1 + Math.floor(3 * uniform()); flips > 0; flips--) {
        // Half of them where the structure is: in the first quarter or in the last bytes.
        const at = uniform() < 0.25 ? good.length - 1 - Math.floor(uniform() * Math.min(good.length, 130)) : Math.floor(uniform() * good.length * (uniform() < 0.5 ? 0.25 : 1))
        bad[at] = Math.floor(256 * uniform())
      }
      const found = await outcome(name, bad)
      expect(typeof found === 'string' || found > 0).toBe(true)
    }
    // And the next file still loads.
    expect(await outcome(name, good)).toBeGreaterThan(0)
  }, 120_000)
})

describe('what unpacks to far more than it should', () => {
  it('stops at what the page needs (LZW)', () => {
    // Each code after the first stands for a string one longer than the last: n codes make n²/2 bytes.
    let bits = (256).toString(2).padStart(9, '0') + (65).toString(2).padStart(9, '0')
    let width = 9
    for (let code = 258; code < 4094; code++) {
      if (code + 1 > (1 << width) - 1 && width < 12) width++
      bits += code.toString(2).padStart(width, '0')
    }
    const bomb = Uint8Array.from({ length: Math.floor(bits.length / 8) }, (_, i) => parseInt(bits.slice(8 * i, 8 * i + 8), 2))
    expect(unpackLzw(bomb, 1000)?.length).toBe(1000)
    expect(unpackPackBits(new Uint8Array(4000).fill(129), 500).length).toBe(500)
  })
  it('stops at what the page needs (Deflate), and still gives the frame', async () => {
    const found = await outcome('bomb.tif', packedTiff({ compression: 8, data: deflateSync(new Uint8Array(8_000_000)) }))
    expect(found === 1 || found === 'damaged').toBe(true)
  })
  it('is refused before anything is allocated', async () => {
    expect(await outcome('huge.tif', packedTiff({ compression: 5, data: lzwOf(raw), width: 4_000_000_000, height: 4_000_000_000 }))).toBe('absurd-size')
  })
})

describe('packed pages', () => {
  it('give the samples that went in', async () => {
    for (const name of ['lzw.tif', 'deflate.tif']) {
      const reader = await openCapture(name, [memorySource(name, files[name]!)])
      expect(Array.from((await reader.readFrames(0, 1)).samples), name).toEqual(Array.from(frames.samples.subarray(0, 48)))
    }
  })
  it('that count down from white are turned, at any depth (TIFF 6.0, PhotometricInterpretation 0)', async () => {
    const reader = await openCapture('white.tif', [memorySource('white.tif', packedTiff({ compression: 5, data: lzwOf(raw), photometric: 0 }))])
    expect(Array.from((await reader.readFrames(0, 1)).samples)).toEqual(Array.from(frames.samples.subarray(0, 48), value => 65535 - value))
  })
})

describe('a PNG with a wrong checksum', () => {
  it('is refused', async () => {
    const bytes = Uint8Array.from(files['a.png']!)
    const view = new DataView(bytes.buffer)
    let at = 8
    while (String.fromCharCode(...bytes.subarray(at + 4, at + 8)) !== 'IDAT') at += 12 + view.getUint32(at)
    const end = at + 8 + view.getUint32(at)
    view.setUint32(end, view.getUint32(end) ^ 1)
    expect(await outcome('a.png', bytes)).toBe('damaged')
  })
})

describe('a folder', () => {
  const pngs = [0, 1, 2].map(i => memorySource(`night/frame${i}.png`, pngFrame(frames, i)))
  it('with hidden files and notes beside the frames opens, and says what was left out', async () => {
    const reader = await openCapture('night', [memorySource('night/.DS_Store', new Uint8Array(60)), ...pngs, memorySource('night/Sequence.settings', new Uint8Array(9)), memorySource('night/notes.txt', new Uint8Array(5))])
    expect(reader.facts.frameCount).toBe(3)
    const note = reader.facts.notes.find(({ code }) => code === 'ignored')!
    expect(note.text).toMatch(/^3 files .*\.DS_Store.*Sequence\.settings/)
  })
  it('of nothing but notes says so', async () => {
    await expect(openCapture('night', [memorySource('night/a.txt', new Uint8Array(5)), memorySource('night/.hidden', new Uint8Array(5))])).rejects.toThrow(/no frames in night/)
  })
})
