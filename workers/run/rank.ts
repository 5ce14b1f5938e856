import { setAsideReasons, type SetAsideReason } from '../../shared/schemas/run'

/** Code of a reason in the frame table: 0 is ranked. */
export const reasonCode = (reason: SetAsideReason): number => 1 + setAsideReasons.indexOf(reason)

/** Scores and verdicts that ranking reads; index = frame. `setAside` holds reason codes. */
export interface Rankable { score: Float64Array, setAside: Uint8Array }

/** Frames best first, and their rank by frame (1 is best, 0 set aside). */
export interface Ranking { order: Int32Array, rank: Int32Array }

/**
 * Ranks the frames that are not set aside by their score, larger first, ties by the smaller frame number.
 * A score that is not a number never ranks above one that is.
 */
export function rankFrames({ score, setAside }: Rankable): Ranking {
  const order = Int32Array.from(indexesWhere(setAside, code => code === 0))
  const value = (i: number) => Number.isNaN(score[i]!) ? Number.NEGATIVE_INFINITY : score[i]!
  order.sort((a, b) => value(b) - value(a) || a - b)
  const rank = new Int32Array(score.length)
  order.forEach((frame, place) => { rank[frame] = place + 1 })
  return { order, rank }
}

/** Frames set aside, per reason; only reasons that occur. */
export function countSetAside(setAside: Uint8Array): Partial<Record<SetAsideReason, number>> {
  const counts: Partial<Record<SetAsideReason, number>> = {}
  for (const code of setAside) {
    if (code === 0) continue
    const reason = setAsideReasons[code - 1]!
    counts[reason] = (counts[reason] ?? 0) + 1
  }
  return counts
}

function indexesWhere(codes: Uint8Array, wanted: (code: number) => boolean): number[] {
  const out: number[] = []
  codes.forEach((code, i) => { if (wanted(code)) out.push(i) })
  return out
}
