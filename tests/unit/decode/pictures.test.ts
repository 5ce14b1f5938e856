/** AVI and JPEG: every layout gives the pixels that went in, and what is not read is refused by its name. */
import { encode } from 'jpeg-js'
import { describe, expect, it } from 'vitest'
import { openCapture } from '../../../workers/decode/index'
import { memorySource } from '../../../workers/source/memory'
import { aviFile, type AviSpec } from '../../fixtures/avi'

const value = (frame: number, y: number, x: number, plane: number) => (frame * 67 + y * 31 + x * 7 + plane * 101) & 255
const open = (name: string, bytes: Uint8Array) => openCapture(name, [memorySource(name, bytes)])

/** Rows as a writer would store them: `stride` bytes each, colours as blue, green, red. */
function stored(frame: number, width: number, height: number, colours: 1 | 3, stride: number, upward: boolean): Uint8Array {
  const bytes = new Uint8Array(stride * height).fill(0xee)
  for (let y = 0; y < height; y++) {
    for (let x = 0; x < width; x++) {
      for (let p = 0; p < colours; p++) bytes[(upward ? height - 1 - y : y) * stride + x * colours + (colours === 3 ? 2 - p : 0)] = value(frame, y, x, p)
    }
  }
  return bytes
}
function expected(frame: number, width: number, height: number, colours: 1 | 3): number[] {
  return Array.from({ length: width * height * colours }, (_, i) => value(frame, Math.floor(i / width) % height, i % width, Math.floor(i / (width * height))))
}

describe('AVI without compression', () => {
  const [width, height] = [5, 3]
  const kinds: { name: string, spec: Pick<AviSpec, 'bits' | 'codec'>, colours: 1 | 3, stride: number, upward: boolean }[] = [
    { name: 'grey, rows unpadded', spec: { bits: 8, codec: 'Y800' }, colours: 1, stride: 5, upward: false },
    { name: 'grey, rows padded', spec: { bits: 8, codec: 'Y800' }, colours: 1, stride: 8, upward: false },
    { name: 'bitmap of 8 bits', spec: { bits: 8 }, colours: 1, stride: 8, upward: true },
    { name: 'bitmap of 8 bits from the top', spec: { bits: 8 }, colours: 1, stride: 8, upward: false },
    { name: 'bitmap of 24 bits', spec: { bits: 24 }, colours: 3, stride: 16, upward: true },
    { name: 'bitmap of 24 bits from the top', spec: { bits: 24 }, colours: 3, stride: 16, upward: false },
  ]
  for (const index of ['old', 'none', 'opendml'] as const) {
    it.each(kinds)(`gives its pixels: $name, index ${index}`, async ({ spec, colours, stride, upward }) => {
      const frames = [0, 1].map(frame => stored(frame, width, height, colours, stride, upward))
      const reader = await open('a.avi', aviFile({ ...spec, width, height: upward || spec.codec ? height : -height, frames, index }))
      expect([reader.facts.frameCount, reader.facts.planes]).toEqual([2, colours])
      for (const frame of [1, 0]) expect(Array.from((await reader.readFrames(frame, 1)).samples)).toEqual(expected(frame, width, height, colours))
    })
  }
  it('whose end is missing gives its whole frames', async () => {
    const frames = [0, 1, 2].map(frame => stored(frame, width, height, 1, 8, true))
    const file = aviFile({ width, height, bits: 8, frames, index: 'none' })
    const reader = await open('a.avi', file.subarray(0, file.length - 10))
    expect(reader.facts.frameCount).toBe(2)
    expect(reader.facts.notes.some(({ code }) => code === 'truncated')).toBe(true)
  })
  it('with compression is refused by the name of its kind', async () => {
    await expect(open('a.avi', aviFile({ width, height, bits: 24, codec: 'MJPG', frames: [new Uint8Array(20)], index: 'old' }))).rejects.toThrow(/Motion JPEG.*Record without compression/)
  })
})

describe('JPEG', () => {
  const grey = (quality: number) => new Uint8Array(encode({ width: 20, height: 12, data: Uint8Array.from({ length: 20 * 12 * 4 }, (_, i) => (i % 4 === 3 ? 255 : 8 * Math.floor(i / 4) % 200)) }, quality).data)
  it('is read and called lossy', async () => {
    const reader = await open('a.jpg', grey(100))
    expect([reader.facts.width, reader.facts.height, reader.facts.planes, reader.facts.bitDepth]).toEqual([20, 12, 3, 8])
    expect(reader.facts.notes.find(({ code }) => code === 'lossy')!.text).toMatch(/not to be trusted/)
    expect((await reader.readFrames(0, 1)).samples.length).toBe(720)
  })
  it('cut off is refused, not filled with grey', async () => {
    const file = grey(90)
    await expect(open('a.jpg', file.subarray(0, file.length - 4))).rejects.toThrow(/ends before its last row/)
  })
  it('that claims a huge frame is refused before it is unpacked', async () => {
    const file = grey(90)
    const at = file.findIndex((byte, i) => byte === 0xff && file[i + 1] === 0xc0)
    file.set([0xff, 0xff, 0xff, 0xff], at + 5)
    await expect(open('a.jpg', file)).rejects.toThrow(/65535 × 65535/)
  })
})
