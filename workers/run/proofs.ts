import type { RunEvent, StackImage } from '../api'
import { keepCount, proofFractions } from '../../shared/schemas/run'
import type { PassContext } from './context'
import type { RunState } from './engine'
import { breathe } from './pool'

export type Proof = Extract<RunEvent, { kind: 'proof' }>

/** Stacks at the standard fractions with their figures, and the plain unregistered average for comparison. */
export async function proofs({ stacker, figurer, graded }: RunState, average: StackImage, { emit, progress, signal }: PassContext): Promise<Proof[]> {
  const made: Proof[] = []
  const tell = (proof: Proof) => {
    made.push(proof)
    repeatProofs([proof], emit)
  }
  progress.begin('proofs', 0, proofFractions.length + 1)
  tell({ kind: 'proof', fraction: 'average', image: average, figures: figurer.ofAverage(average, graded.table.count) })
  for (const fraction of proofFractions) {
    progress.add(1)
    await breathe()
    if (stacker.ranked === 0) break
    const image = await stacker.stack(keepCount(fraction, stacker.ranked), signal)
    tell({ kind: 'proof', fraction, image, figures: figurer.of(image) })
  }
  progress.end()
  return made
}

/** Tells proofs that are known; the receiver owns the copies. */
export function repeatProofs(made: Proof[], emit: (event: RunEvent) => void): void {
  for (const proof of made) emit({ ...proof, image: { ...proof.image, samples: proof.image.samples.slice() } })
}
