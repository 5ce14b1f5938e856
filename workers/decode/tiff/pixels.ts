/** The samples of one TIFF page: strips or tiles, packed or not, planes together or apart. */
import { machineIsLittleEndian, swap16 } from '../bytes'
import type { ByteSource } from '../../source/types'
import { CaptureError, type Samples } from '../types'
import type { TiffPage } from './directory'
import { mostBytesOf, unpackBlock } from './unpack'

export type TiffKind = 'uint8' | 'uint16' | 'float32'

/** How samples come out; null where the depth is not read. Palettes come out as colours of 8 bits. */
export function kindOf({ bits, sampleFormat, photometric }: TiffPage): TiffKind | null {
  if (photometric === 3) return sampleFormat === 1 && (bits === 1 || bits === 2 || bits === 4 || bits === 8) ? 'uint8' : null
  if (sampleFormat === 3) return bits === 32 || bits === 64 ? 'float32' : null
  if (sampleFormat === 2) return bits === 8 || bits === 16 || bits === 32 ? 'float32' : null
  if (bits === 8 || bits === 4 || bits === 2 || bits === 1) return 'uint8'
  if (bits === 16) return 'uint16'
  return bits === 32 ? 'float32' : null
}

const cutOff = (source: ByteSource) => new CaptureError('truncated', `${source.name} ends within a page. Copy it again from the card.`)

/** Reads one sample of a block's row; `row` is the row's first byte. */
function sampleReader(view: DataView, { bits, sampleFormat, littleEndian: le }: TiffPage): (row: number, index: number) => number {
  if (sampleFormat === 3) return bits === 32 ? (row, i) => view.getFloat32(row + 4 * i, le) : (row, i) => view.getFloat64(row + 8 * i, le)
  if (sampleFormat === 2) {
    if (bits === 8) return (row, i) => view.getInt8(row + i)
    return bits === 16 ? (row, i) => view.getInt16(row + 2 * i, le) : (row, i) => view.getInt32(row + 4 * i, le)
  }
  if (bits === 8) return (row, i) => view.getUint8(row + i)
  if (bits === 16) return (row, i) => view.getUint16(row + 2 * i, le)
  if (bits === 32) return (row, i) => view.getUint32(row + 4 * i, le)
  return (row, i) => (view.getUint8(row + ((i * bits) >> 3)) >> (8 - bits - ((i * bits) & 7))) & ((1 << bits) - 1)
}

/** Adds up horizontal differences of a row (predictor 2) for whole-byte integers. */
function undoPredictor(view: DataView, row: number, count: number, { bits, samples, littleEndian: le, planar }: TiffPage): void {
  const step = planar ? 1 : samples
  for (let i = step; i < count; i++) {
    if (bits === 8) view.setUint8(row + i, view.getUint8(row + i) + view.getUint8(row + i - step))
    else if (bits === 16) view.setUint16(row + 2 * i, view.getUint16(row + 2 * i, le) + view.getUint16(row + 2 * (i - step), le), le)
    else view.setUint32(row + 4 * i, view.getUint32(row + 4 * i, le) + view.getUint32(row + 4 * (i - step), le), le)
  }
}

/**
 * The frame of a page whose samples lie in the file as they are wanted: grey of 8 or 16 bits in strips that follow one
 * another, without compression. One read, no work a pixel; null for all other pages.
 */
async function plainPixels(source: ByteSource, page: TiffPage, signal?: AbortSignal): Promise<Samples | null> {
  const { width, height, bits, sampleFormat, samples, tile, offsets, byteCounts } = page
  if (page.compression !== 1 || page.predictor !== 1 || tile || samples !== 1 || sampleFormat !== 1 || page.photometric !== 1 || (bits !== 8 && bits !== 16)) return null
  const rowBytes = width * bits / 8
  const strips = Math.ceil(height / page.rowsPerStrip)
  if (offsets.length < strips) return null
  for (let i = 0; i < strips; i++) {
    const rows = Math.min(page.rowsPerStrip, height - i * page.rowsPerStrip)
    if ((byteCounts[i] ?? rows * rowBytes) < rows * rowBytes || offsets[i] !== offsets[0]! + i * page.rowsPerStrip * rowBytes) return null
  }
  if (offsets[0]! + rowBytes * height > source.size) throw cutOff(source)
  const bytes = await source.read(offsets[0]!, rowBytes * height, signal)
  if (bits === 8) return bytes
  const words = new Uint16Array(bytes.buffer, bytes.byteOffset, width * height)
  if (page.littleEndian !== machineIsLittleEndian) swap16(words)
  return words
}

/** The frame of a page: planar, row 0 at the top. The first `planes` of the page's samples are used; a palette is looked up. */
export async function readPixels(source: ByteSource, page: TiffPage, planes: 1 | 3, kind: TiffKind, signal?: AbortSignal): Promise<Samples> {
  const plain = await plainPixels(source, page, signal)
  if (plain) return plain
  const { width, height, bits, samples, tile, planar, colourMap } = page
  const pixels = width * height
  const palette = page.photometric === 3
  const stored = palette ? 1 : planes
  const blockWidth = tile?.width ?? width
  const blockHeight = tile?.height ?? page.rowsPerStrip
  const across = Math.ceil(width / blockWidth)
  const down = Math.ceil(height / blockHeight)
  const perBlock = planar ? 1 : samples
  const rowBytes = Math.ceil(blockWidth * perBlock * bits / 8)
  // Before anything is allocated: the strips or tiles are there.
  if (page.offsets.length < (planar ? stored : 1) * across * down) throw new CaptureError('damaged', `A page of ${source.name} does not say where all of its image is. The TIFF file is damaged; copy it again.`)
  const damagedBlock = () => new CaptureError('damaged', `A page of ${source.name} cannot be unpacked. The file is damaged; copy it again.`)
  // The largest strip that the data can give bounds what is allocated for a page that claims more.
  let packed = 0
  for (let i = 0; i < (planar ? stored : 1) * across * down; i++) packed += page.byteCounts[i] ?? 0
  if (page.compression !== 1 && mostBytesOf(page.compression, packed) < rowBytes * Math.min(height, blockHeight)) throw damagedBlock()
  const out: Samples = kind === 'uint8' ? new Uint8Array(pixels * planes) : kind === 'uint16' ? new Uint16Array(pixels * planes) : new Float32Array(pixels * planes)
  const top = page.photometric === 0 && kind !== 'float32' ? 2 ** bits - 1 : 0
  for (let set = 0; set < (planar ? stored : 1); set++) {
    for (let by = 0; by < down; by++) {
      for (let bx = 0; bx < across; bx++) {
        const index = set * across * down + by * across + bx
        const rows = tile ? blockHeight : Math.min(blockHeight, height - by * blockHeight)
        const wanted = rowBytes * rows
        const count = page.compression === 1 ? wanted : page.byteCounts[index] ?? wanted
        const offset = page.offsets[index]!
        if (offset + count > source.size) throw cutOff(source)
        const bytes = await unpackBlock(page.compression, await source.read(offset, count, signal), wanted)
        if (!bytes) throw damagedBlock()
        const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength)
        const sample = sampleReader(view, page)
        const shown = Math.min(rows, height - by * blockHeight)
        const columns = Math.min(blockWidth, width - bx * blockWidth)
        for (let y = 0; y < shown; y++) {
          const row = y * rowBytes
          if (page.predictor === 2) undoPredictor(view, row, blockWidth * perBlock, page)
          const to = (by * blockHeight + y) * width + bx * blockWidth
          for (let p = 0; p < (planar ? 1 : stored); p++) {
            const base = (planar ? set : p) * pixels + to
            for (let x = 0; x < columns; x++) {
              const value = sample(row, x * perBlock + p)
              if (palette) {
                // The colour map has 16 bits: all reds, all greens, all blues (TIFF 6.0, ColorMap).
                for (let c = 0; c < 3; c++) out[c * pixels + to + x] = (colourMap![c * 2 ** bits + value] ?? 0) >> 8
              }
              else out[base + x] = top > 0 ? top - value : Number.isFinite(value) ? value : 0
            }
          }
        }
      }
    }
  }
  return out
}
