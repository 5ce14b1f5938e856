import { createServer, type Server } from 'node:http'
import type { AddressInfo } from 'node:net'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { recipeHash } from '../../shared/recipe/canonical'
import { withRecipeValue } from '../../shared/recipe/sentences'
import { defaultRecipe } from '../../shared/schemas/recipe'
import type { ExportFile, FiledRun } from '../../workers/api'
import { Engine } from '../../workers/run/engine'
import { exportFiles } from '../../workers/run/export'
import { GuestRun, nearestRung } from '../../workers/run/guest'
import { InlinePool } from '../../workers/run/pool'
import { runResult } from '../../workers/run/result'
import { movingDouble, SpyReader } from './support/moving-double'

const recipe = withRecipeValue(withRecipeValue(defaultRecipe, 'restore.method', 'wavelets'), 'restore.gainBy', 'hand')
let engine: Engine
let filed: FiledRun
let averageBytes = 0
let server: Server
const ranges: string[] = []

beforeAll(async () => {
  const capture = movingDouble({ frames: 90, width: 48, height: 40, planes: 3 })
  engine = new Engine(new SpyReader(capture.facts, capture.samples), { pool: new InlinePool(), budgetBytes: 2 ** 28 })
  await engine.run(recipe, null, () => undefined, new AbortController().signal)
  const context = { recipe, stretch: { black: 0, white: 1, gamma: 1 }, fraction: 0.1, targetName: 'A pair', observer: '', recipeName: null }
  const files = await exportFiles(engine, ['ladder-fits', 'frames-csv', 'average-fits'], context)
  averageBytes = files[2]!.bytes.length
  server = createServer((request, answer) => {
    const file: ExportFile | undefined = files.find(each => request.url === `/${each.role}`)
    if (!file) return answer.writeHead(404).end()
    const range = /^bytes=(\d+)-(\d+)$/.exec(request.headers.range ?? '')
    if (!range) return answer.end(file.bytes)
    ranges.push(`${request.url} ${range[1]}-${range[2]}`)
    const part = file.bytes.subarray(Number(range[1]), Number(range[2]) + 1)
    answer.writeHead(206, { 'content-range': `bytes ${range[1]}-${Number(range[1]) + part.length - 1}/${file.bytes.length}` }).end(part)
  })
  await new Promise<void>(resolve => server.listen(0, '127.0.0.1', resolve))
  const origin = `http://127.0.0.1:${(server.address() as AddressInfo).port}`
  filed = {
    ladderUrl: `${origin}/ladder`, ladderBytes: files[0]!.bytes.length, framesUrl: `${origin}/frames`, averageUrl: `${origin}/average`,
    result: await runResult(engine, recipe, await recipeHash(recipe)),
  }
})
afterAll(() => new Promise(resolve => server.close(resolve)))

describe('a filed run without its capture', () => {
  it('gives the very stack of a rung by one range, and the frame table', async () => {
    const guest = new GuestRun()
    const { counts, columns } = await guest.open(filed)
    expect(counts).toEqual(filed.result.ladder.counts)
    const { ranking, refined, graded } = engine.state!
    expect(columns.rank).toEqual(ranking.rank)
    expect(columns.dx).toEqual(refined.shifts.dx)
    expect(columns.peak).toEqual(graded.table.peak)
    ranges.length = 0
    const image = await guest.stack(9, false)
    expect(ranges.length).toBe(1)
    expect(image).toEqual(await engine.stack(9, false))
    const restored = await guest.stack(9, true)
    expect(restored.samples).toEqual((await engine.stack(9, true)).samples)
    expect(restored.samples).not.toEqual(image.samples)
    expect(restored.restoration).toMatchObject({ method: 'wavelets', gains: [1.5, 1.5, 1.2, 1, 1, 1] })
    expect(ranges.length).toBe(1)
    expect(await guest.average()).toEqual(engine.average())
    await guest.close()
    await expect(guest.stack(9, false)).rejects.toThrow('No run is open')
  })

  it('shows exactly the filed stack where the ladder has no such rung', async () => {
    const { counts } = filed.result.ladder
    const between = Array.from({ length: counts.at(-1)! }, (_, k) => k + 1).find(count => !counts.includes(count))!
    expect(between).toBeGreaterThan(1)
    const context = { recipe, stretch: { black: 0, white: 1, gamma: 1 }, fraction: between / counts.at(-1)!, targetName: 'A pair', observer: '', recipeName: null }
    const [stack] = await exportFiles(engine, ['stack-fits'], context)
    const stackUrl = `data:application/fits;base64,${Buffer.from(stack!.bytes).toString('base64')}`
    const guest = new GuestRun()
    const keep = { fraction: context.fraction, count: between }
    const opened = await guest.open({ ...filed, stackUrl, result: { ...filed.result, keep } })
    expect(opened.counts).toContain(between)
    expect(await guest.stack(between, false)).toEqual(await engine.stack(between, false))
    expect((await guest.stack(counts[0]!, false)).count).toBe(counts[0])
  })

  it('snaps to the nearest rung and says which', async () => {
    const guest = new GuestRun()
    const sparse = { ...filed, result: { ...filed.result, ladder: { ...filed.result.ladder, counts: filed.result.ladder.counts } } }
    const { counts } = await guest.open(sparse)
    const between = counts.findIndex((count, k) => k > 0 && count - counts[k - 1]! > 1)
    const wanted = counts[between]! - 1
    const image = await guest.stack(wanted, false)
    expect(counts).toContain(image.count)
    expect(image).toEqual(await engine.stack(image.count, false))
  })

  it('says plainly when the ladder is not what it should be', async () => {
    await expect(new GuestRun().open({ ...filed, ladderUrl: filed.averageUrl!, ladderBytes: averageBytes })).rejects.toThrow('The ladder of this run cannot be read')
  })

  it('takes the smaller of two equally near rungs', () => {
    expect(nearestRung([1, 3, 9], 2)).toBe(0)
    expect(nearestRung([1, 3, 9], 7)).toBe(2)
  })
})
