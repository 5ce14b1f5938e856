/** The difference of two recipes, as tracked changes in one paragraph. */
import type { Recipe } from '../schemas/recipe'
import type { Chosen, Piece } from './sentences'
import { recipePieces } from './sentences'

export type DiffPiece =
  | { kind: 'same', piece: Piece }
  | { kind: 'changed', path: string, name: string, before: string, after: string }
  | { kind: 'removed' | 'added', text: string }

/** Values are matched by path and the words between them by their order, so only what differs is marked. */
export function recipeDiff(before: Recipe, after: Recipe, chosen: Chosen = {}): DiffPiece[] {
  const left = recipePieces(before, chosen)
  const right = recipePieces(after, chosen)
  const key = (piece: Piece) => (piece.kind === 'value' ? `value:${piece.path}` : `text:${piece.text}`)
  const result: DiffPiece[] = []
  let i = 0
  let j = 0
  const rest = (pieces: Piece[], from: number, wanted: string) => pieces.slice(from).some(piece => key(piece) === wanted)
  while (i < left.length || j < right.length) {
    const a = left[i]
    const b = right[j]
    if (a && b && key(a) === key(b)) {
      if (a.kind === 'value' && b.kind === 'value' && a.value !== b.value) result.push({ kind: 'changed', path: b.path, name: b.name, before: a.text, after: b.text })
      else result.push({ kind: 'same', piece: b })
      i++
      j++
    }
    else if (a && (!b || !rest(right, j, key(a)))) {
      result.push({ kind: 'removed', text: a.text })
      i++
    }
    else if (b) {
      result.push({ kind: 'added', text: b.text })
      j++
    }
    else break
  }
  return result
}

/** Names of the values that differ, for summaries such as "changes the keep fraction and the blur". */
export function changedValues(before: Recipe, after: Recipe): string[] {
  return recipeDiff(before, after).flatMap(piece => (piece.kind === 'changed' ? [piece.name] : []))
}
