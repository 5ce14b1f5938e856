import type { FrameColumns } from '../api'
import { frameTableHeader } from '../encode/csv'

/**
 * The columns of a filed frame table; fields that are empty are NaN. Rows may come in any order; a frame without a rank was set aside (the table does not
 * say why, so its code is that of the last reason).
 * @throws Error with a plain message where the text is no frame table.
 */
export function columnsFromCsv(text: string): FrameColumns {
  const lines = text.split(/\r?\n/).filter(line => line !== '')
  if (lines[0] !== frameTableHeader) throw new Error('The frame table of this run cannot be read: its header is not the expected one.')
  const count = lines.length - 1
  const column = () => new Float64Array(count).fill(Number.NaN)
  const columns: FrameColumns = {
    count, score: column(), laplacian: column(), peak: column(), x: column(), y: column(), dx: column(), dy: column(),
    rank: new Int32Array(count), setAside: new Uint8Array(count), seconds: null,
  }
  for (const line of lines.slice(1)) {
    const fields = line.split(',')
    const frame = Number(fields[0])
    if (!Number.isInteger(frame) || frame < 0 || frame >= count) throw new Error('The frame table of this run cannot be read: a frame number is out of range.')
    const value = (k: number) => fields[k] ? Number(fields[k]) : Number.NaN
    for (const [k, name] of (['score', 'laplacian', 'peak', 'x', 'y', 'dx', 'dy'] as const).entries()) columns[name][frame] = value(k + 1)
    columns.rank[frame] = fields[8] ? Number(fields[8]) : 0
    columns.setAside[frame] = columns.rank[frame] > 0 ? 0 : 5
  }
  return columns
}
