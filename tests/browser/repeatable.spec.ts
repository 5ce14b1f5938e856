/**
 * The same bytes, whatever happens: in the browser as in Node, with and without shared memory, after a reload, after the page was
 * killed in the middle of a pass, and in two tabs at once.
 */
import { mkdtempSync, readFileSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import type { Page } from '@playwright/test'
import { fileSource } from '../../scripts/lib/file-source'
import { writeCapture } from '../../scripts/bench/capture'
import { defaultRecipe } from '../../shared/schemas/recipe'
import { openCapture } from '../../workers/decode/index'
import { Engine } from '../../workers/run/engine'
import { exportFiles } from '../../workers/run/export'
import { InlinePool } from '../../workers/run/pool'
import { expect, open, signIn, test } from './lib/test'

const file = join(mkdtempSync(join(tmpdir(), 'lull-repeat-')), 'pair.ser')
const FRAMES = 1500
let wanted: Buffer

/** What follows the header of a FITS file: the header says when and by what it was made. */
function dataOf(fits: Buffer): Buffer {
  for (let block = 0; block < fits.length; block += 2880) {
    for (let card = block; card < block + 2880; card += 80) {
      if (fits.subarray(card, card + 8).toString('latin1') === 'END     ') return fits.subarray(block + 2880)
    }
  }
  throw new Error('This is no FITS file.')
}

const finished = (page: Page) => expect(page.getByRole('button', { name: 'File this run' })).toBeEnabled({ timeout: 90_000 })

async function begin(page: Page) {
  await open(page, '/bench')
  await page.getByLabel('Open a capture').setInputFiles(file)
}

async function stackOf(page: Page): Promise<Buffer> {
  await finished(page)
  await page.getByRole('button', { name: 'Save', exact: true }).first().click()
  const [download] = await Promise.all([page.waitForEvent('download'), page.getByRole('menuitem', { name: /Stack, FITS/ }).click()])
  return dataOf(readFileSync(await download.path()))
}

const passes = (page: Page) => page.evaluate(() => performance.getEntriesByType('measure').map(({ name }) => name))
const same = async (page: Page, what: string) => expect((await stackOf(page)).equals(wanted), what).toBe(true)

test.beforeAll(async () => {
  await writeCapture(file, 128, 128, FRAMES)
  const source = fileSource(file, 'pair.ser', readFileSync(file).length)
  const engine = new Engine(await openCapture('pair.ser', [source]), { pool: new InlinePool(), budgetBytes: 2 ** 28 })
  await engine.run(defaultRecipe, null, () => undefined, new AbortController().signal)
  const [stack] = await exportFiles(engine, ['stack-fits'], { recipe: defaultRecipe, stretch: { black: 0, white: 1, midtone: 0.5 } as never, fraction: defaultRecipe.keep.fraction, targetName: '', observer: '', recipeName: null })
  wanted = dataOf(Buffer.from(stack!.bytes))
  expect(wanted.length).toBeGreaterThanOrEqual(128 * 128 * 4)
  engine.close()
  await source.close()
})

test.beforeEach(async ({ page, baseURL }) => { await signIn(page, baseURL!, 'member') })

test('the stack of the browser is that of Node to the bit, and again after a reload, when nothing is computed', async ({ page }) => {
  await begin(page)
  await same(page, 'over shared memory')
  expect(await page.evaluate(() => crossOriginIsolated)).toBe(true)
  await begin(page)
  await same(page, 'after a reload')
  expect((await passes(page)).filter(name => ['lull.survey', 'lull.grade', 'lull.refine'].includes(name))).toEqual([])
})

test('it is the same where memory cannot be shared', async ({ page }) => {
  await page.route('**/bench', async (route) => {
    const answer = await route.fetch()
    const headers = Object.fromEntries(Object.entries(answer.headers()).filter(([name]) => !name.startsWith('cross-origin-')))
    await route.fulfill({ response: answer, headers })
  })
  await begin(page)
  await same(page, 'without shared memory')
  expect(await page.evaluate(() => crossOriginIsolated)).toBe(false)
})

for (const [pass, before] of [['survey', null], ['grade', 'lull.survey'], ['refine', 'lull.grade'], ['ladder', 'lull.refine'], ['proofs', 'lull.ladder']] as const) {
  test(`a page killed in its pass "${pass}" goes on to the same bytes`, async ({ page, context }) => {
    await begin(page)
    if (before) await page.waitForFunction(name => performance.getEntriesByName(name).length > 0, before, { polling: 5 })
    expect(await passes(page), 'the page was killed too late').not.toContain('lull.proofs')
    const cdp = await context.newCDPSession(page)
    const crashed = page.waitForEvent('crash')
    void cdp.send('Page.crash').catch(() => undefined)
    await crashed
    await page.close()
    const next = await context.newPage()
    await begin(next)
    await same(next, `after a kill in ${pass}`)
    // What was complete before the kill is not computed again.
    if (before && before !== 'lull.ladder') expect(await passes(next)).not.toContain(before)
  })
}

test('two tabs work on the same capture at once, and neither hurts the other', async ({ page, context }) => {
  const other = await context.newPage()
  await Promise.all([begin(page), begin(other)])
  await same(page, 'the first tab')
  await other.bringToFront()
  await same(other, 'the second tab')
})
