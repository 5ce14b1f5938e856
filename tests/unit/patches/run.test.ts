import { createHash } from 'node:crypto'
import { beforeAll, describe, expect, it } from 'vitest'
import { nodePool } from '../../../scripts/lib/node-pool'
import { perfectImage } from '../../../scripts/accuracy/rehearsals'
import { sceneErrors } from '../../../scripts/accuracy/scene-error'
import type { KnownCapture } from '../../../scripts/accuracy/truth'
import { defaultRecipe, type Recipe } from '../../../shared/schemas/recipe'
import { fieldNodes } from '../../../workers/rehearse/field'
import { demoScene, rehearsalReader, type RehearsalReader, type RehearsalSpec } from '../../../workers/rehearse/index'
import { Engine } from '../../../workers/run/engine'
import type { Pool } from '../../../workers/run/pool'
import { InlinePool } from '../../../workers/run/pool'
import { pack } from '../../../workers/run/pack'

const terrain = demoScene('terrain')
const twoLayers = [{ share: 0.4, speedMPerS: 5, directionDeg: 31.7 }, { share: 0.6, speedMPerS: 9, directionDeg: 112.5, heightM: 4000 }]
const differing: RehearsalSpec = { ...terrain, name: 'air that differs', seed: 91, width: 144, height: 128, frames: 40, subSteps: 1, air: { ...terrain.air, layers: twoLayers } }
const alike: RehearsalSpec = { ...differing, name: 'air as one', air: terrain.air }
const how = (patches: Recipe['register']['patches']): Recipe => ({ ...defaultRecipe, register: { ...defaultRecipe.register, patches } })

async function run(reader: RehearsalReader, patches: Recipe['register']['patches'], pool: Pool = new InlinePool(), budgetBytes = 2 ** 28) {
  const engine = new Engine(reader, { pool, budgetBytes })
  const state = await engine.run(how(patches), differing.optics, () => undefined, new AbortController().signal)
  return { engine, state }
}

describe('a field of patches', () => {
  let one: RehearsalReader
  let two: RehearsalReader
  beforeAll(async () => {
    one = await rehearsalReader(alike)
    two = await rehearsalReader(differing)
    for (let i = 0; i < differing.frames; i++) { one.truth(i); two.truth(i) }
  }, 120_000)

  it('is looked at through several columns of air only where a layer is high', () => {
    expect(fieldNodes(alike)).toHaveLength(1)
    const nodes = fieldNodes(differing)
    expect(nodes.length).toBeGreaterThan(20)
    const middle = nodes[nodes.length >> 1]!
    expect(middle.towards.x).toBeCloseTo(0, 12)
    const sum = nodes.reduce((total, node) => total + node.across[37]! * node.down[101]!, 0)
    expect(sum).toBeCloseTo(1, 10)
  })

  it('comes nearer to the scene than one shift a frame, where the air differs', async () => {
    const known = { sceneImage: await perfectImage(differing), optics: differing.optics, wavelengthsNm: [differing.optics.wavelengthNm] } as KnownCapture
    const without = await run(two, 'never')
    const auto = await run(two, 'auto')
    expect(auto.state.patched.figures!.used).toBe(true)
    for (const count of [4, 20, 40]) {
      const before = sceneErrors(await without.engine.stack(count, false), known).error
      expect(sceneErrors(await auto.engine.stack(count, false), known).error).toBeLessThan(0.97 * before)
    }
  }, 120_000)

  it('is left alone where the air is one: the same bytes as without', async () => {
    const without = await run(one, 'never')
    const auto = await run(one, 'auto')
    expect(auto.state.patched.figures!.used).toBe(false)
    expect((await auto.engine.stack(9, false)).samples).toEqual((await without.engine.stack(9, false)).samples)
  }, 120_000)

  it('gives the same bytes for any number of workers, any block size and any way of the slider', async () => {
    const bytes = async (pool: Pool, budget: number) => {
      const { engine, state } = await run(two, 'always', pool, budget)
      const stacks = []
      for (const n of [40, 3, 17, 18, 1, 39]) stacks.push((await engine.stack(n, false)).samples)
      pool.end?.()
      const { field } = state.patched
      return createHash('sha256').update(pack({ dx: field!.dx, quality: field!.quality, sums: state.ladder.sums, stacks })).digest('hex')
    }
    const first = await bytes(new InlinePool(), 2 ** 28)
    expect(await bytes(nodePool(3), 2 ** 28)).toBe(first)
    expect(await bytes(nodePool(2, false), 2 ** 18)).toBe(first)
  }, 120_000)
})
