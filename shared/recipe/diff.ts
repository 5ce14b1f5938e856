/** The difference of two recipes, as tracked changes in one paragraph. */
import type { Recipe } from '../schemas/recipe'
import type { Chosen, Piece } from './sentences'
import { recipePieces } from './sentences'

export type DiffPiece =
  | { kind: 'same', piece: Piece }
  | { kind: 'changed', path: string, name: string, before: string, after: string }
  | { kind: 'removed' | 'added', text: string }

/** Values are matched by path and words by themselves, along the longest common subsequence, so only what differs is marked. */
export function recipeDiff(before: Recipe, after: Recipe, chosen: Chosen = {}): DiffPiece[] {
  const left = recipePieces(before, chosen)
  const right = recipePieces(after, chosen)
  const common = commonLengths(left.map(keyOf), right.map(keyOf))
  const result: DiffPiece[] = []
  let i = 0
  let j = 0
  while (i < left.length || j < right.length) {
    const a = left[i]
    const b = right[j]
    if (a && b && keyOf(a) === keyOf(b)) {
      result.push(a.kind === 'value' && b.kind === 'value' && a.value !== b.value
        ? { kind: 'changed', path: b.path, name: b.name, before: a.text, after: b.text }
        : { kind: 'same', piece: b })
      i++
      j++
    }
    else if (a && (!b || common[i + 1]![j]! >= common[i]![j + 1]!)) {
      result.push({ kind: 'removed', text: a.text })
      i++
    }
    else {
      result.push({ kind: 'added', text: b!.text })
      j++
    }
  }
  return result
}

const keyOf = (piece: Piece): string => (piece.kind === 'value' ? `value:${piece.path}` : `text:${piece.text}`)

/** lengths[i][j]: the longest common subsequence of left from i on and right from j on. */
function commonLengths(left: readonly string[], right: readonly string[]): number[][] {
  const lengths = Array.from({ length: left.length + 1 }, () => new Array<number>(right.length + 1).fill(0))
  for (let i = left.length - 1; i >= 0; i--) {
    for (let j = right.length - 1; j >= 0; j--) {
      lengths[i]![j] = left[i] === right[j] ? lengths[i + 1]![j + 1]! + 1 : Math.max(lengths[i + 1]![j]!, lengths[i]![j + 1]!)
    }
  }
  return lengths
}

/** Names of the values that differ, for summaries such as "changes the keep fraction and the blur". */
export function changedValues(before: Recipe, after: Recipe): string[] {
  return recipeDiff(before, after).flatMap(piece => (piece.kind === 'changed' ? [piece.name] : []))
}
