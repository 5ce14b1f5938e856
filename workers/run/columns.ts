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
  /** Reason codes; 0 is ranked. */
  setAside: Uint8Array
}

export interface ShiftTable {
  dx: Float64Array
  dy: Float64Array
  confidence: Float64Array
  setAside: Uint8Array
}

export function gradeTable(count: number): GradeTable {
  const column = () => new Float64Array(count).fill(Number.NaN)
  return {
    count, laplacian: column(), peak: column(), flux: column(), background: column(),
    x: column(), y: column(), dx: column(), dy: column(), setAside: new Uint8Array(count),
  }
}

/** The columns as the bench gets them: copies that the receiver owns. Frames set aside have no shift. */
export function frameColumns(grade: GradeTable, shifts: ShiftTable | null, rank: Int32Array | null, by: ScoreMeasure, seconds: Float64Array | null): FrameColumns {
  const setAside = (shifts ?? grade).setAside
  const shown = (column: Float64Array) => shifts ? column.map((value, i) => setAside[i] ? Number.NaN : value) : column.slice()
  return {
    count: grade.count,
    score: grade[by].slice(), laplacian: grade.laplacian.slice(), peak: grade.peak.slice(),
    x: grade.x.slice(), y: grade.y.slice(),
    dx: shown((shifts ?? grade).dx), dy: shown((shifts ?? grade).dy),
    rank: rank ? rank.slice() : new Int32Array(grade.count),
    setAside: setAside.slice(), seconds: seconds ? seconds.slice() : null,
  }
}
