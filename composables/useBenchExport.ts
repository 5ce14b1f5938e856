/** What a run states about itself when it is filed, and the files that go with it. */
import type { ExportKind } from '~~/workers/api'
import { recipeHash } from '~~/shared/recipe/canonical'
import { proofFractions, type FileRole, type RunResult } from '~~/shared/schemas/run'
import type { FilingFile } from './useFiling'

const filedKinds: ExportKind[] = ['stack-fits', 'average-fits', 'view-png8', 'thumbnail-png', 'frames-csv', 'ladder-fits', 'proofs-png', 'recipe-json', 'facts-json']

export function useBenchExport() {
  const bench = useBenchStore()
  const session = useSessionStore()

  function context(targetName: string) {
    return { recipe: toRaw(bench.recipe), stretch: { ...bench.stretch }, fraction: bench.recipe.keep.fraction, targetName, observer: bench.facts?.observer || session.me?.name || '', recipeName: bench.saved && !bench.changed ? bench.saved.name : null }
  }

  /** Makes one file and hands it to the browser to save. */
  async function save(kind: ExportKind): Promise<string | null> {
    const core = bench.exporter()
    if (!core || !bench.facts) return null
    const [file] = await core.export([kind], context(bench.facts.object || baseName(bench.facts.name)))
    if (!file) return null
    const url = URL.createObjectURL(new Blob([file.bytes as Uint8Array<ArrayBuffer>], { type: file.type }))
    const link = document.createElement('a')
    link.href = url
    link.download = file.name
    link.click()
    setTimeout(() => URL.revokeObjectURL(url), 60_000)
    return file.name
  }

  async function result(): Promise<RunResult> {
    const { facts, chosen, kind, average, ladder, provenance } = bench
    const core = bench.exporter()
    if (!core || !facts || !chosen || !kind || !average || !ladder || !provenance) throw new Error('The run is not finished yet: wait until the proofs are there.')
    const figures = await core.figures(bench.count)
    const restoration = await core.restorePlan(bench.count)
    const evidence = await core.evidence()
    const starTransfer = await core.starTransfer(bench.count)
    const proofs = proofFractions.map(fraction => bench.proofs.find(proof => proof.fraction === fraction)?.figures)
    if (proofs.some(proof => !proof)) throw new Error('The proofs are not all there yet.')
    return JSON.parse(JSON.stringify({
      facts, recipe: bench.recipe, recipeHash: await recipeHash(toRaw(bench.recipe)), kind, chosen,
      keep: { fraction: bench.recipe.keep.fraction, count: bench.count }, ranked: bench.ranked, setAside: bench.setAside,
      figures, proofs, average: average.figures, ladder, stretch: bench.stretch, restoration, evidence, starTransfer, provenance, measure: bench.runMeasure,
    })) as RunResult
  }

  /** The files of the run on the bench; the raw capture too where it is one file and wanted. */
  async function files(targetName: string, withRaw: boolean): Promise<FilingFile[]> {
    const core = bench.exporter()
    if (!core) return []
    const made = await core.export(filedKinds, context(targetName))
    const all: FilingFile[] = made.map(file => ({ role: file.role as FileRole, name: file.name, data: new Blob([file.bytes as Uint8Array<ArrayBuffer>], { type: file.type }) }))
    const input = bench.input
    if (withRaw && input?.kind === 'files') for (const file of input.files) all.push({ role: 'raw', name: file.name, data: file })
    return all
  }

  return { save, result, files }
}

/** A file name without its extension. */
export const baseName = (name: string) => name.replace(/\.[A-Za-z0-9]{1,5}$/, '')
