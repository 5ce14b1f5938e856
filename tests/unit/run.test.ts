import { createHash } from 'node:crypto'
import { describe, expect, it } from 'vitest'
import { nodePool } from '../../scripts/lib/node-pool'
import { defaultRecipe, type Recipe } from '../../shared/schemas/recipe'
import { withRecipeValue } from '../../shared/recipe/sentences'
import type { RunEvent } from '../../workers/api'
import { Engine, type EngineOptions } from '../../workers/run/engine'
import { pack } from '../../workers/run/pack'
import { InlinePool } from '../../workers/run/pool'
import { MemoryStore } from '../../workers/run/store'
import { accumulateShifted, coveredBy, scratchFor } from '../../workers/stack/accumulate'
import { movingDouble, SpyReader } from './support/moving-double'

const capture = movingDouble({ frames: 150, width: 64, height: 56 })
const open = (options: Partial<EngineOptions> = {}, before?: (first: number) => void) => {
  const reader = new SpyReader(capture.facts, capture.samples, before)
  return { reader, engine: new Engine(reader, { pool: new InlinePool(), budgetBytes: 2 ** 28, ...options }) }
}
const never = new AbortController().signal
const run = (engine: Engine, recipe: Recipe = defaultRecipe, emit: (event: RunEvent) => void = () => undefined, signal = never) => engine.run(recipe, null, emit, signal)

/** Everything that must not depend on how the work was shared out. */
async function bytesOf(engine: Engine) {
  const { refined, graded, ranking, ladder } = engine.state!
  const all = {
    dx: refined.shifts.dx, dy: refined.shifts.dy, laplacian: graded.table.laplacian, peak: graded.table.peak,
    order: ranking.order, average: engine.average().samples,
    sums: ladder.sums, stacks: await Promise.all([1, 7, 20, 33, 150].map(async n => (await engine.stack(n, false)).samples)),
  }
  const digest = (value: unknown) => createHash('sha256').update(pack(value)).digest('hex')
  return Object.fromEntries(Object.entries(all).map(([name, value]) => [name, digest(value)]))
}

describe('a run', () => {
  it('ranks every frame or sets it aside for a reason, and tells the bench', async () => {
    const { engine } = open()
    const events: RunEvent[] = []
    const { ranking } = await run(engine, defaultRecipe, event => events.push(event))
    expect(ranking.order.length).toBe(150)
    const kinds = events.map(event => event.kind)
    // A single exposure is there before the survey is.
    expect(kinds.indexOf('preview')).toBeLessThan(kinds.indexOf('surveyed'))
    expect(kinds).toContain('preview')
    for (const kind of ['surveyed', 'frames', 'ranked', 'ladder', 'proof'] as const) expect(kinds).toContain(kind)
    expect(events.filter(event => event.kind === 'proof').map(event => event.fraction)).toEqual(['average', 0.01, 0.02, 0.05, 0.1, 0.2, 0.5, 1])
    expect(events.filter(event => event.kind === 'timing').map(event => event.pass)).toEqual(['survey', 'grade', 'refine', 'ladder', 'proofs'])
  })

  it('finds the shifts of the truth, up to one common offset', async () => {
    const { engine } = open()
    const { refined: { shifts }, ranking } = await run(engine)
    const best = [...ranking.order.slice(0, 75)]
    const residual = (axis: 'x' | 'y') => {
      const offsets = best.map(i => (axis === 'x' ? shifts.dx : shifts.dy)[i]! + capture.truth[axis][i]!)
      const mean = offsets.reduce((sum, value) => sum + value, 0) / offsets.length
      return Math.sqrt(offsets.reduce((sum, value) => sum + (value - mean) ** 2, 0) / offsets.length)
    }
    expect(residual('x')).toBeLessThan(0.15)
    expect(residual('y')).toBeLessThan(0.15)
  })

  it('gives a 10 % stack that is sharper than the unregistered average', async () => {
    const { engine } = open()
    await run(engine)
    const peak = (samples: Float32Array) => samples.reduce((most, value) => Math.max(most, value), 0)
    const stack = await engine.stack(15, false)
    expect(stack.count).toBe(15)
    const faulty = 5 * 64 + 9
    expect(peak(stack.samples)).toBeGreaterThan(1.5 * peak(engine.average().samples.map((value, i) => i === faulty ? 0 : value)))
  })

  it('stacks exactly the best n frames, whichever way it got there', async () => {
    const { engine } = open()
    const { ranking, refined, surveyed } = await run(engine)
    const { width, height } = capture.facts
    for (const n of [1, 2, 19, 20, 64, 63, 150, 5, 77]) {
      const image = await engine.stack(n, false)
      const sum = new Int32Array(width * height)
      const counts = new Int32Array(width * height)
      const scratch = scratchFor(width)
      for (const frame of ranking.order.slice(0, n)) {
        const { samples } = await engine.frame(frame)
        const dx = refined.shifts.dx[frame]!, dy = refined.shifts.dy[frame]!
        accumulateShifted(samples, width, height, dx, dy, defaultRecipe.combine.kernel, surveyed.scale, 1, sum, scratch)
        const { x0, x1, y0, y1 } = coveredBy(defaultRecipe.combine.kernel, width, height, dx, dy)
        for (let y = y0; y < y1; y++) for (let x = x0; x < x1; x++) counts[y * width + x]! += 1
      }
      expect(image.count).toBe(n)
      counts.forEach((covered, i) => {
        if (covered > 0) expect(image.samples[i]).toBe(Math.fround(sum[i]! / (covered * surveyed.scale)))
      })
    }
  })

  it('averages the samples as stored, hot pixels and all', async () => {
    const { engine } = open()
    await run(engine)
    const size = 64 * 56
    const average = engine.average().samples
    for (const i of [0, 5 * 64 + 9, 1000, size - 1]) {
      let sum = 0
      for (let k = 0; k < 150; k++) sum += capture.samples[k * size + i]!
      expect(average[i]).toBe(Math.fround(sum / 150))
    }
  })
})

describe('repeatability', () => {
  it('gives the same bytes for any number of workers and any block size', async () => {
    const first = open()
    await run(first.engine)
    const wanted = await bytesOf(first.engine)
    for (const [workers, blockFrames, budgetBytes] of [[1, 7, 2 ** 28], [2, 150, 2 ** 28], [3, 11, 2 ** 28], [8, 1, 2 ** 28], [2, 16, 200_000]] as const) {
      const pool = workers > 1 ? nodePool(workers) : new InlinePool()
      const { engine } = open({ pool, blockFrames, budgetBytes })
      await run(engine)
      expect(await bytesOf(engine)).toEqual(wanted)
      pool.end()
    }
  }, 60_000)

  it('gives the same bytes where memory cannot be shared', async () => {
    const shared = open()
    await run(shared.engine)
    const pool = nodePool(2, false)
    const { engine } = open({ pool, blockFrames: 20 })
    await run(engine)
    expect(await bytesOf(engine)).toEqual(await bytesOf(shared.engine))
    pool.end()
  }, 60_000)
})

describe('only what a change touches runs again', () => {
  it('reads the file once where frames fit in memory, and never for keep or restoration', async () => {
    const { engine, reader } = open()
    await run(engine)
    const after = reader.framesRead
    expect(after).toBeLessThanOrEqual(150 + 64)
    const timed: string[] = []
    for (const [path, value] of [['keep.fraction', 0.33], ['restore.method', 'wavelets'], ['restore.scales', 2]] as const) {
      await run(engine, withRecipeValue(defaultRecipe, path, value), event => event.kind === 'timing' && timed.push(event.pass))
    }
    expect(reader.framesRead).toBe(after)
    expect(timed).toEqual([])
  })

  it.each([
    ['score.rankBy', 'laplacian', ['ladder']], ['combine.kernel', 'bilinear', ['ladder']],
    ['register.referenceFraction', 0.2, ['refine', 'ladder']], ['register.method', 'centroid', ['refine', 'ladder']],
    ['score.blurPx', 2, ['survey', 'grade', 'refine', 'ladder']],
  ] as const)('a change of %s to %s runs %j', async (path, value, passes) => {
    const { engine, reader } = open()
    await run(engine)
    const after = reader.framesRead
    const timed: string[] = []
    await run(engine, withRecipeValue(defaultRecipe, path, value), event => event.kind === 'timing' && timed.push(event.pass))
    expect(timed.filter(pass => pass !== 'proofs')).toEqual(passes)
    expect(reader.framesRead).toBe(after)
  })

  it('does not register again when the ranking changes', async () => {
    const { engine } = open()
    const before = (await run(engine)).refined
    expect((await run(engine, withRecipeValue(defaultRecipe, 'score.rankBy', 'laplacian'))).refined).toBe(before)
  })
})

describe('cancel and go on', () => {
  it('stops in the middle, keeps what was computed and ends with the same bytes', async () => {
    const store = new MemoryStore()
    const whole = open()
    await run(whole.engine)
    const wanted = await bytesOf(whole.engine)
    for (const pass of ['survey', 'grade', 'refine', 'ladder'] as const) {
      const controller = new AbortController()
      const { engine } = open({ store, blockFrames: 10 })
      await expect(run(engine, defaultRecipe, (event) => {
        if (event.kind === 'progress' && event.progress.pass === pass) controller.abort()
      }, controller.signal)).rejects.toThrow()
      await run(engine)
      expect(await bytesOf(engine)).toEqual(wanted)
      store.files.clear()
    }
  })

  it('computes nothing after a reload that is in the store', async () => {
    const store = new MemoryStore()
    const first = open({ store })
    await run(first.engine)
    const second = open({ store })
    expect(await second.engine.resumable()).toBe(true)
    const timed: string[] = []
    await run(second.engine, defaultRecipe, event => event.kind === 'timing' && timed.push(event.pass))
    expect(timed).toEqual(['proofs'])
    expect(await bytesOf(second.engine)).toEqual(await bytesOf(first.engine))
  })

  it.each(['grade', 'refine', 'ladder'] as const)('goes on from the last stored block of %s', async (pass) => {
    const store = new MemoryStore()
    let now = ''
    // Without a cache every pass reads; the page goes away when this one has come to frame 100.
    const options = { store, blockFrames: 10, checkpointMs: 0, budgetBytes: 100_000 }
    const { engine } = open(options, (first) => { if (now === pass && first >= 100) throw new Error('the page went away') })
    await expect(run(engine, defaultRecipe, (event) => {
      if (event.kind === 'progress') now = event.progress.pass === 'refine' && event.progress.round < 2 ? '' : event.progress.pass
    })).rejects.toThrow('the page went away')
    const again = open(options)
    let total = 0
    await run(again.engine, defaultRecipe, (event) => {
      if (event.kind === 'progress' && event.progress.pass === pass && total === 0) total = event.progress.total - event.progress.done
    })
    expect(total).toBeGreaterThan(0)
    expect(total).toBeLessThanOrEqual(70)
    const whole = open()
    await run(whole.engine)
    expect(await bytesOf(again.engine)).toEqual(await bytesOf(whole.engine))
  })
})

describe('an unfinished ladder in the store', () => {
  it('of which a part was dropped is added up anew, to the same bytes', async () => {
    const store = new MemoryStore()
    let adding = false
    const options = { store, blockFrames: 10, checkpointMs: 0, budgetBytes: 100_000 }
    const { engine } = open(options, (first) => { if (adding && first >= 100) throw new Error('the page went away') })
    await expect(run(engine, defaultRecipe, (event) => { if (event.kind === 'progress') adding = event.progress.pass === 'ladder' })).rejects.toThrow('the page went away')
    const parts = [...store.files.keys()].filter(name => /^laddering-.+-.+-\d+$/.test(name))
    expect(parts.length).toBeGreaterThan(1)
    store.files.delete(parts.at(-1)!)
    const again = open(options)
    await run(again.engine)
    const whole = open()
    await run(whole.engine)
    expect(await bytesOf(again.engine)).toEqual(await bytesOf(whole.engine))
  })

  it('of two pages at once gives both the same bytes', async () => {
    const store = new MemoryStore()
    const options = { store, blockFrames: 10, checkpointMs: 0, budgetBytes: 100_000 }
    const [one, other] = [open(options), open({ ...options, blockFrames: 7 })]
    await Promise.all([run(one.engine), run(other.engine)])
    expect(await bytesOf(one.engine)).toEqual(await bytesOf(other.engine))
  })
})

describe('frames that cannot be read', () => {
  it('are set aside and counted, and the rest is used', async () => {
    const reader = new SpyReader(capture.facts, capture.samples)
    const plain = reader.readFrames.bind(reader)
    reader.readFrames = (first, count, signal) => first <= 42 && 42 < first + count ? Promise.reject(new Error('a bad sector')) : plain(first, count, signal)
    const engine = new Engine(reader, { pool: new InlinePool(), budgetBytes: 2 ** 28 })
    const events: RunEvent[] = []
    const { ranking } = await run(engine, defaultRecipe, event => events.push(event))
    expect(ranking.order.length).toBe(149)
    expect(events.find(event => event.kind === 'ranked')).toEqual({ kind: 'ranked', ranked: 149, setAside: { unreadable: 1 } })
    const size = 64 * 56
    let sum = 0
    for (let k = 0; k < 150; k++) if (k !== 42) sum += capture.samples[k * size + 77]!
    expect(engine.average().samples[77]).toBe(Math.fround(sum / 149))
  })
})
