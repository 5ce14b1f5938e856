/** The frame table as CSV (RFC 4180, with LF line ends). */
import type { FrameColumns } from '../api'

export const frameTableHeader = 'frame,score,laplacian,peak,x,y,dx,dy,rank,kept'

/** Shortest decimal that reads back as the same float64; an empty field for what is not known. */
const cell = (value: number) => (Number.isFinite(value) ? String(value) : '')

/**
 * Rows in the order of the frames. `kept` is the number of frames in the stack: ranks 1 to kept have 1. Scores,
 * shifts and rank of a frame that was set aside are empty, its kept is 0.
 */
export function framesCsv(columns: FrameColumns, kept: number): string {
  const lines = [frameTableHeader]
  for (let i = 0; i < columns.count; i++) {
    if (columns.setAside[i] !== 0 || columns.rank[i] === 0) lines.push(`${i},,${cell(columns.laplacian[i]!)},${cell(columns.peak[i]!)},,,,,,0`)
    else {
      lines.push([i, cell(columns.score[i]!), cell(columns.laplacian[i]!), cell(columns.peak[i]!), cell(columns.x[i]!), cell(columns.y[i]!),
        cell(columns.dx[i]!), cell(columns.dy[i]!), columns.rank[i]!, columns.rank[i]! <= kept ? 1 : 0].join(','))
    }
  }
  return `${lines.join('\n')}\n`
}

/** A text cell that no spreadsheet takes for a formula: quoted where needed, an apostrophe before = + - @ tab CR. */
export function textCell(text: string): string {
  const guarded = /^[=+\-@\t\r]/.test(text) ? `'${text}` : text
  return /[",\r\n]/.test(guarded) || guarded !== text ? `"${guarded.replaceAll('"', '""')}"` : guarded
}
