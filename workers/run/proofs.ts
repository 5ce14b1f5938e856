import type { StackImage } from '../api'
import { keepCount, proofFractions } from '../../shared/schemas/run'
import type { PassContext } from './context'
import type { RunState } from './engine'
import { breathe } from './pool'

/** Stacks at the standard fractions with their figures, and the plain unregistered average for comparison. */
export async function proofs({ stacker, figurer, graded }: RunState, average: StackImage, { emit, progress, signal }: PassContext): Promise<void> {
  progress.begin('proofs', 0, proofFractions.length + 1)
  emit({ kind: 'proof', fraction: 'average', image: average, figures: figurer.ofAverage(average, graded.table.count) })
  for (const fraction of proofFractions) {
    progress.add(1)
    await breathe()
    if (stacker.ranked === 0) break
    const image = await stacker.stack(keepCount(fraction, stacker.ranked), signal)
    emit({ kind: 'proof', fraction, image, figures: figurer.of(image) })
  }
  progress.end()
}
