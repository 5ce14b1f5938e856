/**
 * What the browser remembers of captures on this bench, by fingerprint and by user: recipe, corrections, and where
 * the capture came from. The stages themselves are kept by the core; this is what leads back to them.
 */
import type { CaptureInput } from '~~/workers/api'
import type { CaptureOverrides } from '~~/shared/schemas/capture'
import { readRecipe } from '~~/shared/recipe/migrate'
import type { Recipe } from '~~/shared/schemas/recipe'
import type { OpticsExtra } from '~/stores/bench'

export interface BenchMemory {
  fingerprint: string
  name: string
  /** How it can be opened again: a demo by itself, files only by the user (or a kept handle). */
  source: { kind: 'demo', scene: 'double' | 'triple' | 'planet' | 'terrain' } | { kind: 'files' } | { kind: 'url', name: string, urls: { url: string, name: string, sizeBytes: number }[] }
  recipe: Recipe
  overrides: CaptureOverrides
  extra: OpticsExtra
  finished: boolean
  at: string
}

const MOST = 20
const keyOf = () => `lull-bench:${useSessionStore().me?.id ?? 'nobody'}`

export function benchMemories(): BenchMemory[] {
  try {
    const list = JSON.parse(localStorage.getItem(keyOf()) ?? '[]') as BenchMemory[]
    return list.flatMap((entry) => {
      try {
        return [{ ...entry, recipe: readRecipe(entry.recipe) }]
      }
      catch {
        return []
      }
    })
  }
  catch {
    return []
  }
}

function write(list: BenchMemory[]) {
  try {
    localStorage.setItem(keyOf(), JSON.stringify(list.slice(0, MOST)))
  }
  catch { /* Storage may be full or forbidden; then nothing is remembered. */ }
}

export const recallBench = (fingerprint: string) => benchMemories().find(entry => entry.fingerprint === fingerprint) ?? null

export function rememberBench(entry: Omit<BenchMemory, 'source' | 'at'> & { input: CaptureInput }) {
  const { input, ...rest } = entry
  const source: BenchMemory['source'] = input.kind === 'files' ? { kind: 'files' } : input.kind === 'demo' ? { kind: 'demo', scene: input.scene } : { kind: 'url', name: input.name, urls: input.urls }
  write([JSON.parse(JSON.stringify({ ...rest, source, at: new Date().toISOString() })), ...benchMemories().filter(other => other.fingerprint !== entry.fingerprint)])
}

export function forgetBench(fingerprint: string) {
  write(benchMemories().filter(entry => entry.fingerprint !== fingerprint))
}
