import { describe, expect, it } from 'vitest'
import { defaultRecipe } from '../../shared/schemas/recipe'
import type { RunEvent } from '../../workers/api'
import { InlinePool } from '../../workers/run/pool'
import { Session } from '../../workers/run/session'
import { MemoryStore } from '../../workers/run/store'

const session = () => new Session({ makePool: () => new InlinePool(), store: new MemoryStore(), budgetBytes: 2 ** 28 })

describe('a session of the bench', () => {
  it('cancels a pass and goes on where it was', async () => {
    const core = session()
    const opened = await core.open({ kind: 'demo', scene: 'double' }, {})
    expect(opened).toMatchObject({ ok: true, resumable: false })
    const heard = new Promise<void>((resolve) => {
      void core.run(defaultRecipe, null, (event: RunEvent) => { if (event.kind === 'progress' && event.progress.pass === 'grade') resolve() })
        .then(answer => expect(answer).toEqual({ cancelled: true }))
    })
    await heard
    await core.cancel()
    const passes: string[] = []
    expect(await core.run(defaultRecipe, null, event => event.kind === 'timing' && passes.push(event.pass))).toEqual({ cancelled: false })
    expect(passes).toEqual(['grade', 'refine', 'ladder', 'proofs'])
    expect((await core.stack(17, false)).count).toBe(17)
    await core.close()
    await expect(core.stack(3, false)).rejects.toThrow('No capture is open')
  }, 60_000)

  it('lets a newer stack take the place of an unfinished older one', async () => {
    const core = session()
    await core.open({ kind: 'demo', scene: 'terrain' }, {})
    await core.run(defaultRecipe, null, () => undefined)
    const older = core.stack(200, false)
    const newer = core.stack(30, false)
    await expect(older).rejects.toThrow(/abort/i)
    expect((await newer).count).toBe(30)
    await core.close()
  }, 60_000)
})
