/** Simulates the demo's captures and works them through with the real core. */
import type { ExportFile } from '../../workers/api'
import { openCapture } from '../../workers/decode/index'
import { pixelScaleArcsec, rehearsalSer, skyToPixels, type RehearsalSpec } from '../../workers/rehearse/index'
import { Engine } from '../../workers/run/engine'
import { exportFiles } from '../../workers/run/export'
import { InlinePool } from '../../workers/run/pool'
import { runResult } from '../../workers/run/result'
import { memorySource } from '../../workers/source/memory'
import { recipeHash } from '../../shared/recipe/canonical'
import { keepCount, type RunResult } from '../../shared/schemas/run'
import type { Recipe } from '../../shared/schemas/recipe'

export interface OpenedCapture { spec: RehearsalSpec, name: string, bytes: Uint8Array, engine: Engine }

export interface WorkedRun {
  result: RunResult
  files: ExportFile[]
  /** Places on the stack, image px: the brightest point, and the scene's stars where the recipe of the sky puts them. */
  places: { x: number, y: number }[]
}

export async function openRehearsal(spec: RehearsalSpec, name: string, observer: string, telescope: string): Promise<OpenedCapture> {
  const bytes = rehearsalSer(spec, { observer, instrument: 'Simulated detector', telescope })
  const reader = await openCapture(name, [memorySource(name, bytes as Uint8Array<ArrayBuffer>)], { exposureMs: spec.exposureMs, object: spec.name })
  return { spec, name, bytes, engine: new Engine(reader, { pool: new InlinePool(), budgetBytes: 256 * 2 ** 20 }) }
}

const fileKinds = ['stack-fits', 'average-fits', 'view-png8', 'thumbnail-png', 'frames-csv', 'ladder-fits', 'proofs-png', 'recipe-json', 'facts-json'] as const

export async function workThrough(capture: OpenedCapture, recipe: Recipe, names: { target: string, observer: string, recipe: string }): Promise<WorkedRun> {
  const { engine, spec } = capture
  const state = await engine.run(recipe, spec.optics, () => undefined, new AbortController().signal)
  const result = await runResult(engine, recipe, await recipeHash(recipe), true)
  const files = await exportFiles(engine, [...fileKinds], {
    recipe, stretch: result.stretch, fraction: recipe.keep.fraction, targetName: names.target, observer: names.observer, recipeName: names.recipe,
  })
  const stack = await engine.stack(keepCount(recipe.keep.fraction, state.stacker.ranked), false)
  return { result, files, places: placesOf(stack.samples, stack.width, stack.height, spec) }
}

function placesOf(samples: Float32Array, width: number, height: number, spec: RehearsalSpec): { x: number, y: number }[] {
  let best = 0
  for (let i = 1; i < width * height; i++) if (samples[i]! > samples[best]!) best = i
  const x = best % width
  const y = Math.floor(best / width)
  if (spec.scene.kind !== 'stars') return [{ x: Math.floor(width / 2), y: Math.floor(height / 2) }]
  return spec.scene.stars.map((star) => {
    const { dx, dy } = skyToPixels(star.separationArcsec, star.positionAngleDeg, spec.upDeg, pixelScaleArcsec(spec.optics))
    return { x: x + dx, y: y + dy }
  })
}
