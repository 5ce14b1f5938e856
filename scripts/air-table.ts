/**
 * Makes the table of workers/restore/air-table.ts: `npx tsx scripts/air-table.ts`. A rehearsed patch of ground is seen
 * through steady air of a known strength, ranked, registered and stacked like any capture, and compared with the same patch through
 * a perfect telescope: the transfer of the stack of the best share of frames at some frequencies. Two patches and two lots of air
 * a row; nearly without noise. Takes some minutes.
 */
import { Engine } from '../workers/run/engine'
import { demoScene, rehearsalReader, type RehearsalSpec } from '../workers/rehearse/index'
import { defaultRecipe } from '../shared/schemas/recipe'
import { keepCount } from '../shared/schemas/run'
import { perfectImage } from './accuracy/rehearsals'
import { sceneErrors } from './accuracy/scene-error'
import { nodePool } from './lib/node-pool'

const RATIOS = [1, 1.5, 2, 2.5, 3, 3.5, 4, 5, 6, 7, 8.5, 10]
const SHARES = [0.02, 0.05, 0.1, 0.2, 0.35, 0.5, 1]
const AT = [0.05, 0.1, 0.15, 0.2, 0.25, 0.3, 0.4, 0.5, 0.65]
const SEEDS = [[811, 61], [823, 62]] as const

const pool = nodePool(1)
const terrain = demoScene('terrain')
const wanted = process.argv.slice(2).map(Number)
for (const ratio of wanted.length > 0 ? wanted : RATIOS) {
  const sums = SHARES.map(() => AT.map(() => 0))
  for (const [seed, patch] of SEEDS) {
    const spec: RehearsalSpec = {
      ...terrain, seed, frames: 300, width: 160, height: 160, intervalMs: 40, air: { ...terrain.air, apertureOverR0: ratio, gusts: { amplitude: 0, periodS: 3 } },
      scene: { ...terrain.scene, seed: patch, fluxElectrons: 20_000 } as RehearsalSpec['scene'],
      detector: { ...terrain.detector, bitDepth: 16, gain: 2, hotPixels: 0 }, motion: { ...terrain.motion, rateXPxPerS: 0.3, rateYPxPerS: 0, periodicPx: 0 },
    }
    const engine = new Engine(await rehearsalReader(spec), { pool, budgetBytes: 2 ** 28 })
    const { stacker } = await engine.run(defaultRecipe, spec.optics, () => undefined, new AbortController().signal)
    const known = { optics: spec.optics, wavelengthsNm: [spec.optics.wavelengthNm], sceneImage: await perfectImage(spec) }
    for (const [i, share] of SHARES.entries()) {
      const { transfer } = sceneErrors(await engine.stack(keepCount(share, stacker.ranked), false), known, AT)
      transfer.forEach((value, k) => { sums[i]![k]! += value / SEEDS.length })
    }
    engine.close()
  }
  console.log(`  // D/r0 ${ratio}`)
  console.log(`  [${sums.map(row => `[${row.map(value => value.toFixed(3)).join(', ')}]`).join(', ')}],`)
}
pool.end()
