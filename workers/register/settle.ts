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

/** How far, in robust deviations, a shift may lie from what its neighbours lead to. */
const SIGMAS = 6
/** Sure frames on each side that are asked, and how far away they may be. */
const REACH = 7
const FARTHEST = 30

/**
 * Marks shifts that jump out of the drift: 1 where the frame should be set aside as "unsure".
 *
 * The sure frames before a frame lead to a place for it, and so do those after it (straight line by medians of
 * pairwise slopes: Theil 1950, Sen 1968); drift of any speed is followed, at both ends as well. A frame that fits
 * either side is kept: a bump against the telescope is a step that everything after it shares. A frame that fits
 * neither, by more than both 6 robust deviations of what the air does and `leastPx`, is a wrong lock.
 */
export function settleShifts(table: ShiftTable, leastPx: number): Uint8Array {
  const count = table.dx.length
  const usable = Uint8Array.from({ length: count }, (_, i) => (table.sure[i] && Number.isFinite(table.dx[i]!) && Number.isFinite(table.dy[i]!) ? 1 : 0))
  const off = { x: new Float64Array(count).fill(NaN), y: new Float64Array(count).fill(NaN) }
  for (let i = 0; i < count; i++) {
    if (!usable[i]) continue
    off.x[i] = nearest(table.dx, usable, i)
    off.y[i] = nearest(table.dy, usable, i)
  }
  const limitX = Math.max(leastPx, SIGMAS * deviation(off.x))
  const limitY = Math.max(leastPx, SIGMAS * deviation(off.y))
  return Uint8Array.from({ length: count }, (_, i) => (!usable[i] || off.x[i]! > limitX || off.y[i]! > limitY ? 1 : 0))
}

/** Distance of a value from the nearer of what the frames before and after lead to; NaN without neighbours. */
function nearest(values: ArrayLike<number>, usable: Uint8Array, at: number): number {
  const before = Math.abs(values[at]! - led(values, usable, at, -1))
  const after = Math.abs(values[at]! - led(values, usable, at, 1))
  return Number.isNaN(before) ? after : Number.isNaN(after) ? before : Math.min(before, after)
}

const places: number[] = []
const numbers: number[] = []
function led(values: ArrayLike<number>, usable: Uint8Array, at: number, direction: -1 | 1): number {
  places.length = 0
  for (let k = 1; k <= FARTHEST && places.length < REACH; k++) {
    const j = at + direction * k
    if (j < 0 || j >= usable.length) break
    if (usable[j]) places.push(j)
  }
  if (places.length < 3) return NaN
  numbers.length = 0
  for (let a = 0; a < places.length; a++) {
    for (let b = a + 1; b < places.length; b++) numbers.push((values[places[b]!]! - values[places[a]!]!) / (places[b]! - places[a]!))
  }
  const slope = middle(numbers)
  numbers.length = 0
  for (const j of places) numbers.push(values[j]! - slope * (j - at))
  return middle(numbers)
}

function middle(list: number[]): number {
  list.sort((a, b) => a - b)
  const n = list.length
  return 0.5 * (list[(n - 1) >> 1]! + list[n >> 1]!)
}

function deviation(values: Float64Array): number {
  const known = [...values].filter(Number.isFinite)
  return known.length > 0 ? 1.4826 * middle(known) : 0
}
