import type { FrameColumns } from '../api'
import type { ScoreMeasure } from '../../shared/schemas/recipe'

/** What the passes know of every frame, in columns; index = frame number. NaN where not known yet. */
export interface GradeTable {
  count: number
  laplacian: Float64Array
  peak: Float64Array
  flux: Float64Array
  background: Float64Array
  x: Float64Array
  y: Float64Array
  /** First shifts, onto the survey's reference. */
  dx: Float64Array
  dy: Float64Array
  /** Transfer of detail on the survey's reference; NaN where frames were not registered yet. */
  transfer: Float64Array
  /** Reason codes; 0 is ranked. */
  setAside: Uint8Array
}

export interface ShiftTable {
  dx: Float64Array
  dy: Float64Array
  confidence: Float64Array
  /** How much of the reference's detail the frame carries; NaN for stars. */
  transfer: Float64Array
  setAside: Uint8Array
}

export function gradeTable(count: number): GradeTable {
  const column = () => new Float64Array(count).fill(Number.NaN)
  return {
    count, laplacian: column(), peak: column(), flux: column(), background: column(),
    x: column(), y: column(), dx: column(), dy: column(), transfer: column(), setAside: new Uint8Array(count),
  }
}

/** The columns as the bench gets them: copies that the receiver owns. Frames set aside have no shift. */
export function frameColumns(grade: GradeTable, shifts: ShiftTable | null, rank: Int32Array | null, by: ScoreMeasure, seconds: Float64Array | null): FrameColumns {
  const setAside = (shifts ?? grade).setAside
  const shown = (column: Float64Array) => shifts ? column.map((value, i) => setAside[i] ? Number.NaN : value) : column.slice()
  return {
    count: grade.count,
    score: scoreColumn(grade, shifts, by).slice(), laplacian: grade.laplacian.slice(), peak: grade.peak.slice(),
    x: grade.x.slice(), y: grade.y.slice(),
    dx: shown((shifts ?? grade).dx), dy: shown((shifts ?? grade).dy),
    rank: rank ? rank.slice() : new Int32Array(grade.count),
    setAside: setAside.slice(), seconds: seconds ? seconds.slice() : null,
  }
}

/** The column that ranks. While transfer is not known yet (it needs the last reference), the Laplacian variance stands in for it. */
export function scoreColumn(grade: GradeTable, shifts: ShiftTable | null, by: ScoreMeasure): Float64Array {
  if (by !== 'transfer') return grade[by]
  return shifts?.transfer ?? (grade.transfer.some(Number.isFinite) ? grade.transfer : grade.laplacian)
}
