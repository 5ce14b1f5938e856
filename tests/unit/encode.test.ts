import { createHash } from 'node:crypto'
import { decode as decodePng } from 'fast-png'
import { describe, expect, it } from 'vitest'
import * as UTIF from 'utif2'
import { checksumOf, encodeChecksum } from '../../workers/encode/checksum'
import { framesCsv, frameTableHeader, textCell } from '../../workers/encode/csv'
import { cubeLayout, decodeCubeFrame, encodeFits, textCards } from '../../workers/encode/fits'
import { crc32 } from '../../shared/crc32'
import { encodePng } from '../../workers/encode/png'
import { encodeTiff16 } from '../../workers/encode/tiff'

describe('FITS checksum', () => {
  // FITS Standard 4.0, appendix J.2: the worked example and the two ends.
  it('encodes the standard’s examples', () => {
    expect(encodeChecksum(868229149)).toBe('hcHjjc9ghcEghc9g')
    expect(encodeChecksum(0, false)).toBe('0000000000000000')
    expect(encodeChecksum(0)).toBe('orrrrooooooooooo')
    expect(encodeChecksum(0xffffffff)).toBe('0000000000000000')
  })
  it('carries around', () => {
    expect(checksumOf(Uint8Array.of(255, 255, 255, 255, 0, 0, 0, 1))).toBe(1)
    expect(() => checksumOf(new Uint8Array(3))).toThrow(RangeError)
  })
})

describe('FITS file', () => {
  // Accepted by an independent verifier without a warning and read back by an independent library.
  it('is the golden file byte for byte', () => {
    // Storage order 0, 1, 32768, 65535 with rows going up: the second row comes first in memory.
    const file = encodeFits({ width: 2, height: 2, depth: [], data: Uint16Array.of(32768, 65535, 0, 1), cards: [] })
    expect(file.byteLength).toBe(5760)
    const text = new TextDecoder().decode(file.subarray(0, 2880))
    expect(text).toContain('DATASUM = \'2147549184\'')
    expect(text).toContain('CHECKSUM= \'ICemIAbjIAbjIAbj\'')
    expect(createHash('sha256').update(file).digest('hex')).toBe('424de24fc8b0fe8ef52a422f0d7c4bdbc7fc397e96a9ccf694158df39352beca')
  })
  it('sums to all ones with its checksum, cards of every kind included', () => {
    const cards = [{ key: 'OBJECT', value: 'O’Hara’s "pair" ″' }, { key: 'MJD-AVG', value: 61000.123456789 }, { key: 'XPOSURE', value: 1.6e-7, comment: '[s] tiny' }, ...textCards('HISTORY', 'word '.repeat(60))]
    const file = encodeFits({ width: 3, height: 2, depth: [], data: Float32Array.of(1, 2, 3, 4, 5, 6.5), cards })
    expect(checksumOf(file)).toBe(0xffffffff)
    expect(file.byteLength % 2880).toBe(0)
  })
  it('holds a cube whose planes can be fetched one by one', () => {
    const data = Float32Array.from({ length: 3 * 2 * 3 * 4 }, (_, i) => i)
    const file = encodeFits({ width: 3, height: 2, depth: [3, 4], data, cards: textCards('HISTORY', 'x '.repeat(900)) })
    const layout = cubeLayout(file)!
    expect(layout).toMatchObject({ width: 3, height: 2, planes: 3, count: 4 })
    expect(cubeLayout(file.subarray(0, 2000))).toBeNull()
    const at = layout.dataOffset + 2 * layout.frameBytes
    expect([...decodeCubeFrame(file.slice(at, at + layout.frameBytes), layout)]).toEqual([...data.subarray(36, 54)])
  })
})

describe('image files, read back by other decoders', () => {
  const grey = Uint16Array.from({ length: 35 }, (_, i) => (i * 2657) & 0xffff)
  const colour = Uint16Array.from({ length: 105 }, (_, i) => (i * 9973) & 0xffff)
  it('CRC-32 is that of PNG annex D for the empty end chunk', () => {
    expect(crc32(new TextEncoder().encode('IEND'))).toBe(0xae426082)
  })
  it.each([[1, grey], [3, colour]] as const)('PNG of 16 bit with %d channels', async (channels, data) => {
    const png = decodePng(await encodePng({ width: 5, height: 7, channels, bitDepth: 16, data, text: { Description: 'a stack' } }))
    expect(png).toMatchObject({ width: 5, height: 7, channels, depth: 16 })
    expect([...png.data]).toEqual([...data])
  })
  it('PNG of 8 bit', async () => {
    const data = Uint8Array.from({ length: 105 }, (_, i) => (i * 37) & 255)
    const png = decodePng(await encodePng({ width: 5, height: 7, channels: 3, bitDepth: 8, data }))
    expect([...png.data]).toEqual([...data])
  })
  it.each([[1, grey], [3, colour]] as const)('TIFF of 16 bit with %d channels', (channels, data) => {
    const file = encodeTiff16({ width: 5, height: 7, channels, data, description: 'Stack of 12 frames' })
    const [ifd] = UTIF.decode(file.buffer)
    UTIF.decodeImage(file.buffer, ifd!)
    expect(ifd!.width).toBe(5)
    expect(ifd!.height).toBe(7)
    expect((ifd as unknown as { t270: string[] }).t270[0]).toContain('Stack of 12 frames')
    const bytes = ifd!.data
    const read = Array.from({ length: data.length }, (_, i) => bytes[2 * i]! | (bytes[2 * i + 1]! << 8))
    expect(read).toEqual([...data])
  })
})

describe('tables', () => {
  it('lists frames, with empty fields for those set aside', () => {
    const columns = {
      count: 2, score: Float64Array.of(0.5, Number.NaN), laplacian: Float64Array.of(0.25, 0.1), peak: Float64Array.of(2, 1), x: Float64Array.of(3, 4), y: Float64Array.of(5, 6),
      dx: Float64Array.of(-0.125, 0), dy: Float64Array.of(1e-7, 0), rank: Int32Array.of(1, 0), setAside: Uint8Array.of(0, 1), seconds: null,
    }
    expect(framesCsv(columns, 1)).toBe(`${frameTableHeader}\n0,0.5,0.25,2,3,5,-0.125,1e-7,1,1\n1,,0.1,1,,,,,,0\n`)
  })
  // OWASP, CSV injection: cells that begin with = + - @ tab or CR.
  it('guards text cells', () => {
    expect(textCell('=1+1')).toBe('"\'=1+1"')
    expect(textCell('plain')).toBe('plain')
    expect(textCell('a "b", c')).toBe('"a ""b"", c"')
  })
})
