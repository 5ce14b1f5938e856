/** The samples of one TIFF page: strips or tiles, packed or not, planes together or apart. */
import type { ByteSource } from '../../source/types'
import { CaptureError, type Samples } from '../types'
import type { TiffPage } from './directory'
import { unpackBlock } from './unpack'

export type TiffKind = 'uint8' | 'uint16' | 'float32'

/** How samples come out; null where the depth is not read. */
export function kindOf({ bits, sampleFormat }: TiffPage): TiffKind | null {
  if (sampleFormat === 3) return bits === 32 || bits === 64 ? 'float32' : null
  if (sampleFormat === 2) return bits === 8 || bits === 16 || bits === 32 ? 'float32' : null
  if (bits === 8 || bits === 4 || bits === 2 || bits === 1) return 'uint8'
  if (bits === 16 || bits === 12 || bits === 10 || bits === 14) return bits === 16 ? 'uint16' : null
  return bits === 32 ? 'float32' : null
}

/** Reads one sample of a block's row; `bit` counts from the row's begin. */
function sampleReader(view: DataView, page: TiffPage): (row: number, index: number) => number {
  const { bits, sampleFormat, littleEndian: le } = page
  const bytes = bits / 8
  if (sampleFormat === 3) return bits === 32 ? (row, i) => view.getFloat32(row + 4 * i, le) : (row, i) => view.getFloat64(row + 8 * i, le)
  if (sampleFormat === 2) {
    if (bits === 8) return (row, i) => view.getInt8(row + i)
    return bits === 16 ? (row, i) => view.getInt16(row + 2 * i, le) : (row, i) => view.getInt32(row + 4 * i, le)
  }
  if (bits === 8) return (row, i) => view.getUint8(row + i)
  if (bits === 16) return (row, i) => view.getUint16(row + 2 * i, le)
  if (bits === 32) return (row, i) => view.getUint32(row + bytes * i, le)
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

/** The frame of a page: planar, row 0 at the top. `planes` of the page's samples are used. */
export async function readPixels(source: ByteSource, page: TiffPage, planes: 1 | 3, kind: TiffKind, signal?: AbortSignal): Promise<Samples> {
  const { width, height, bits, samples, tile, planar } = page
  const pixels = width * height
  const out: Samples = kind === 'uint8' ? new Uint8Array(pixels * planes) : kind === 'uint16' ? new Uint16Array(pixels * planes) : new Float32Array(pixels * planes)
  const blockWidth = tile?.width ?? width
  const blockHeight = tile?.height ?? page.rowsPerStrip
  const across = Math.ceil(width / blockWidth)
  const down = Math.ceil(height / blockHeight)
  const perBlock = planar ? 1 : samples
  const rowBytes = Math.ceil(blockWidth * perBlock * bits / 8)
  const inverted = page.photometric === 0 && kind !== 'float32'
  const top = 2 ** Math.min(bits, 16) - 1
  for (let set = 0; set < (planar ? planes : 1); set++) {
    for (let by = 0; by < down; by++) {
      for (let bx = 0; bx < across; bx++) {
        const index = set * across * down + by * across + bx
        const offset = page.offsets[index]
        const count = page.byteCounts[index] ?? rowBytes * blockHeight
        if (offset === undefined || offset + count > source.size) throw new CaptureError('truncated', `${source.name} ends within a page. Copy it again from the card.`)
        const rows = tile ? blockHeight : Math.min(blockHeight, height - by * blockHeight)
        const wanted = rowBytes * rows
        const bytes = await unpackBlock(page.compression, await source.read(offset, page.compression === 1 ? Math.min(count, wanted) : count, signal), wanted)
        if (!bytes) throw new CaptureError('damaged', `A page of ${source.name} cannot be unpacked. The file is damaged; copy it again.`)
        const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength)
        const sample = sampleReader(view, page)
        for (let y = 0; y < rows && by * blockHeight + y < height; y++) {
          const row = y * rowBytes
          if (page.predictor === 2) undoPredictor(view, row, blockWidth * perBlock, page)
          const to = (by * blockHeight + y) * width + bx * blockWidth
          const columns = Math.min(blockWidth, width - bx * blockWidth)
          for (let p = 0; p < (planar ? 1 : planes); p++) {
            const base = (planar ? set : p) * pixels + to
            for (let x = 0; x < columns; x++) {
              const value = sample(row, x * perBlock + p)
              out[base + x] = inverted ? top - value : Number.isFinite(value) ? value : 0
            }
          }
        }
      }
    }
  }
  return out
}
