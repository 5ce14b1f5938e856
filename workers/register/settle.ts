/**
 * A second look at the shifts of a whole pass: what one frame cannot know of itself. Pure; the same table gives the
 * same answer in any order of computation.
 */

export interface ShiftTable {
  /** Shifts in frame order; NaN where a frame has none. */
  dx: ArrayLike<number>
  dy: ArrayLike<number>
  confidence: ArrayLike<number>
  /** 1 where the registrar was sure of the frame by itself. */
  sure: ArrayLike<number>
}

/** How far, in robust deviations of the neighbours' scatter, a shift may lie from its neighbours in time. */
const SIGMAS = 6
/** Frames on each side that count as neighbours. */
const REACH = 7

/**
 * Marks shifts that jump out of the drift: 1 where the frame should be set aside as "unsure".
 *
 * The middle of the neighbours' shifts (median over ±7 sure frames) follows any drift; the scatter about it is what
 * the air does. A shift farther out than both 6 robust deviations and `leastPx` is a wrong lock, unless
 * its own confidence is high: a real jump (a knocked telescope) is seen by every frame after it, and its neighbours' median
 * moves along.
 */
export function settleShifts(table: ShiftTable, leastPx: number): Uint8Array {
  const count = table.dx.length
  const unsure = new Uint8Array(count)
  const offX = new Float64Array(count).fill(NaN)
  const offY = new Float64Array(count).fill(NaN)
  const near: number[] = []
  const middle = (values: ArrayLike<number>, at: number): number => {
    near.length = 0
    for (let j = Math.max(0, at - REACH); j <= Math.min(count - 1, at + REACH); j++) {
      if (j !== at && table.sure[j] && Number.isFinite(values[j]!)) near.push(values[j]!)
    }
    if (near.length < 3) return NaN
    near.sort((a, b) => a - b)
    const n = near.length
    return 0.5 * (near[(n - 1) >> 1]! + near[n >> 1]!)
  }
  const scatterX: number[] = []
  const scatterY: number[] = []
  for (let i = 0; i < count; i++) {
    if (!table.sure[i] || !Number.isFinite(table.dx[i]!)) { unsure[i] = 1; continue }
    offX[i] = table.dx[i]! - middle(table.dx, i)
    offY[i] = table.dy[i]! - middle(table.dy, i)
    if (Number.isFinite(offX[i]!)) {
      scatterX.push(Math.abs(offX[i]!))
      scatterY.push(Math.abs(offY[i]!))
    }
  }
  const mad = (values: number[]): number => {
    if (values.length === 0) return 0
    values.sort((a, b) => a - b)
    return 1.4826 * values[values.length >> 1]!
  }
  const limitX = Math.max(leastPx, SIGMAS * mad(scatterX))
  const limitY = Math.max(leastPx, SIGMAS * mad(scatterY))
  for (let i = 0; i < count; i++) {
    if (unsure[i] || !Number.isFinite(offX[i]!)) continue
    if (Math.abs(offX[i]!) > limitX || Math.abs(offY[i]!) > limitY) unsure[i] = 1
  }
  return unsure
}
