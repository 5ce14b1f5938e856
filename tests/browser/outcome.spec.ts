/**
 * The whole job as people do it: a capture becomes a filed, shared and reviewed run. Nothing is asked of the API
 * that a screen could not do.
 */
import { createHash } from 'node:crypto'
import { mkdtempSync, readFileSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import type { Browser, BrowserContext, Page } from '@playwright/test'
import type { RunDetail, RunPage } from '../../shared/api/archive'
import { demoPeople } from '../../shared/demo'
import { writeCaptures, type CaptureFixture } from '../fixtures/captures'
import { ask, expect, open, ready, signIn, test } from './lib/test'

const folder = mkdtempSync(join(tmpdir(), 'lull-captures-'))
let captures: CaptureFixture[] = []
const filesOf = (key: string) => captures.find(capture => capture.key === key)!.files.map(name => join(folder, name))

test.beforeAll(async () => { captures = await writeCaptures(folder) })

const keep = (page: Page) => page.getByRole('slider', { name: 'Keep', exact: true })
const shownCount = async (page: Page) => Number((await page.getByTestId('shown-count').textContent())!.replaceAll(',', ''))
/** The count that the slider speaks of: "8 percent, 160 of 2,000 frames". */
const spokenCount = async (page: Page) => Number(/, ([\d,]+) of/.exec((await keep(page).getAttribute('aria-valuetext'))!)![1]!.replaceAll(',', ''))
const finished = (page: Page) => expect(page.getByRole('button', { name: 'File this run' })).toBeEnabled({ timeout: 90_000 })

async function openCapture(page: Page, files: string[]) {
  await open(page, '/bench')
  await page.getByLabel('Open a capture').setInputFiles(files)
}

async function member(browser: Browser, baseURL: string, role: 'member' | 'mentor'): Promise<{ context: BrowserContext, page: Page }> {
  const context = await browser.newContext({ baseURL })
  const page = await context.newPage()
  await signIn(page, baseURL, role)
  return { context, page }
}

test('a capture becomes a filed, shared and reviewed run', async ({ page, browser, baseURL }) => {
  test.setTimeout(300_000)
  const person = demoPeople.find(({ role }) => role === 'member')!
  const target = `Plover pair ${Date.now()}`

  await test.step('sign in and open a capture', async () => {
    await open(page, '/sign-in?next=/bench')
    await page.getByLabel('E-mail address').fill(person.email)
    await page.getByLabel('Password', { exact: true }).fill(person.password)
    await page.getByRole('button', { name: 'Sign in', exact: true }).click()
    await expect(page).toHaveURL(/\/bench$/)
    await ready(page)
    await page.getByLabel('Open a capture').setInputFiles(filesOf('ser'))
    await finished(page)
    const marks = await page.evaluate(() => performance.getEntriesByType('measure').map(({ name }) => name))
    for (const pass of ['survey', 'grade', 'refine', 'ladder']) expect(marks).toContain(`lull.${pass}`)
  })

  await test.step('drag the keep slider; the count on the screen is that of the image', async () => {
    const box = (await keep(page).boundingBox())!
    await page.mouse.move(box.x + box.width * 0.66, box.y + box.height / 2)
    await page.mouse.down()
    const seen = new Set<number>()
    for (let step = 0; step <= 20; step++) {
      await page.mouse.move(box.x + box.width * (0.66 + 0.015 * step), box.y + box.height / 2)
      await page.waitForTimeout(40)
      seen.add(await shownCount(page))
    }
    await page.mouse.up()
    expect(seen.size, 'the stack follows the hand').toBeGreaterThan(5)
    await expect.poll(async () => await shownCount(page) === await spokenCount(page)).toBe(true)
    expect(await page.evaluate(() => performance.getEntriesByName('lull.slider').length)).toBeGreaterThan(5)
  })

  await test.step('the same by keyboard, and by the number field; undo takes it back', async () => {
    await keep(page).focus()
    await page.keyboard.press('End')
    await expect.poll(() => keep(page).getAttribute('aria-valuetext')).toMatch(/^100 percent/)
    await page.getByLabel('Keep, percent').fill('10')
    await page.getByLabel('Keep, percent').press('Enter')
    await expect.poll(() => keep(page).getAttribute('aria-valuetext')).toMatch(/^10 percent/)
    await expect.poll(async () => await shownCount(page) === await spokenCount(page)).toBe(true)
    await keep(page).focus()
    await page.keyboard.press('Control+z')
    await expect.poll(() => keep(page).getAttribute('aria-valuetext')).toMatch(/^100 percent/)
    await page.keyboard.press('Control+Shift+z')
    await expect.poll(() => keep(page).getAttribute('aria-valuetext')).toMatch(/^10 percent/)
  })

  await test.step('export the stack', async () => {
    await page.getByRole('button', { name: 'Save', exact: true }).first().click()
    const [download] = await Promise.all([page.waitForEvent('download'), page.getByRole('menuitem', { name: /Stack, FITS/ }).click()])
    const bytes = readFileSync(await download.path())
    expect(bytes.subarray(0, 9).toString('latin1')).toBe('SIMPLE  =')
    expect(bytes.length % 2880).toBe(0)
    const combined = /NCOMBINE= +(\d+)/.exec(bytes.subarray(0, 28_800).toString('latin1'))
    expect(Number(combined![1])).toBe(await shownCount(page))
  })

  await test.step('save the recipe', async () => {
    await page.getByRole('region', { name: 'Recipe', exact: true }).getByRole('button', { name: 'Save', exact: true }).click()
    await page.getByLabel('Name', { exact: true }).fill(`Even pairs ${Date.now()}`)
    await page.getByRole('button', { name: 'Save as a new recipe' }).click()
    await expect(page.getByRole('region', { name: 'Recipe', exact: true })).toContainText('version 1')
  })

  let runPath = ''
  let link = ''
  await test.step('file the run with its raw capture and make a share link', async () => {
    await page.getByRole('button', { name: 'File this run' }).click()
    await page.getByLabel('Target', { exact: true }).fill(target)
    await page.getByLabel(/Include the raw capture/).check()
    await page.getByRole('button', { name: 'File it' }).click()
    await expect(page.getByText('is in the archive: stack, proofs')).toBeVisible({ timeout: 90_000 })
    await page.getByRole('button', { name: 'Make a share link' }).click()
    link = (await page.getByTestId('share-link').textContent())!.trim()
    runPath = (await page.getByRole('link', { name: 'Open its page' }).getAttribute('href'))!
    expect(await page.evaluate(() => performance.getEntriesByName('lull.file').length)).toBe(1)
    const run = await ask<RunDetail>(page, `/api${runPath}`)
    for (const file of run.files) {
      const bytes = await (await page.request.get(file.url)).body()
      expect(createHash('sha256').update(bytes).digest('hex'), file.role).toBe(file.sha256)
    }
    expect(run.files.find(file => file.role === 'raw')!.sha256).toBe(createHash('sha256').update(readFileSync(filesOf('ser')[0]!)).digest('hex'))
  })

  await test.step('a guest opens the link in another browser and moves the slider', async () => {
    const context = await browser.newContext({ baseURL })
    const guest = await context.newPage()
    const address = new URL(/https?:\/\/\S+/.exec(link)![0])
    await open(guest, address.pathname)
    await expect(guest.getByText(/of [\d,]+ frames/).first()).toBeVisible()
    // Opening the ladder sets the slider to what is filed; a hand on it counts from then on.
    await expect(guest.getByText('The stack is on its way.')).toHaveCount(0)
    await expect(guest.getByText(/^longest lull/)).toBeVisible()
    const slider = guest.getByRole('slider', { name: 'Keep', exact: true })
    const before = await slider.getAttribute('aria-valuetext')
    await slider.focus()
    await guest.keyboard.press('PageUp')
    await expect.poll(() => slider.getAttribute('aria-valuetext')).not.toBe(before)
    await context.close()
  })

  await test.step('ask for a review', async () => {
    await open(page, runPath)
    await page.getByRole('button', { name: 'Ask for a review' }).click()
    await page.getByRole('dialog').getByRole('button', { name: 'Ask', exact: true }).click()
    await expect(page.getByText('waits for a mentor').first()).toBeVisible()
  })

  await test.step('the mentor moves the slider, pins a remark and gives the verdict', async () => {
    const { context, page: mentor } = await member(browser, baseURL!, 'mentor')
    await open(mentor, '/reviews')
    await expect(mentor.getByText(target).first()).toBeVisible()
    await open(mentor, `${runPath}/review`)
    const picture = mentor.getByRole('application')
    // The crosshair needs a picture to move over.
    await expect(mentor.getByText('The stack is on its way.')).toHaveCount(0)
    await picture.focus()
    await mentor.keyboard.press('ArrowRight')
    await expect(mentor.getByText(/^x \d+, y \d+: /)).toBeVisible()
    await mentor.keyboard.press('Enter')
    await mentor.getByLabel(/A pin at x/).fill('The companion stands clear of the first ring here.')
    await mentor.getByRole('button', { name: 'Set the pin' }).click()
    await expect(mentor.getByText('The companion stands clear')).toBeVisible()
    await mentor.getByRole('button', { name: 'Accept', exact: true }).first().click()
    await mentor.getByRole('dialog').getByRole('button', { name: 'Accept', exact: true }).click()
    await expect(mentor.getByText('accepted').first()).toBeVisible()
    await context.close()
  })

  await test.step('the owner sees verdict and remark', async () => {
    await open(page, runPath)
    await expect(page.getByText('accepted').first()).toBeVisible()
    await expect(page.getByText('The companion stands clear')).toBeVisible()
  })
})

test('an interrupted upload goes on where it stopped', async ({ page, baseURL, guard }) => {
  test.setTimeout(180_000)
  // The connection is cut on purpose.
  guard.allow(/ERR_|Failed to load resource|net::/)
  await signIn(page, baseURL!, 'member')
  await openCapture(page, filesOf('ser'))
  await finished(page)
  let cuts = 0
  let restarts = 0
  const created = new Map<string, number>()
  await page.route('**/files**', async (route) => {
    const request = route.request()
    if (request.method() === 'POST') {
      const metadata = request.headers()['upload-metadata'] ?? ''
      created.set(metadata, (created.get(metadata) ?? 0) + 1)
      if (created.get(metadata)! > 1) restarts++
    }
    if (request.method() === 'PATCH' && cuts < 4) {
      cuts++
      return cuts % 2 ? route.abort('connectionreset') : route.fulfill({ status: 502, body: 'bad gateway' })
    }
    return route.continue()
  })
  await page.getByRole('button', { name: 'File this run' }).click()
  const target = `Whimbrel pair ${Date.now()}`
  await page.getByLabel('Target', { exact: true }).fill(target)
  await page.getByLabel(/Include the raw capture/).check()
  await page.getByRole('button', { name: 'File it' }).click()
  await expect(page.getByText('is in the archive: stack, proofs')).toBeVisible({ timeout: 120_000 })
  expect(cuts).toBe(4)
  expect(restarts, 'uploads created anew').toBe(0)
  const list = await ask<RunPage>(page, `/api/runs?search=${encodeURIComponent(target)}`)
  const run = await ask<RunDetail>(page, `/api/runs/${list.items[0]!.id}`)
  const raw = run.files.find(file => file.role === 'raw')!
  const bytes = await (await page.request.get(raw.url)).body()
  expect(createHash('sha256').update(bytes).digest('hex')).toBe(createHash('sha256').update(readFileSync(filesOf('ser')[0]!)).digest('hex'))
})

test('a page reloaded in the middle of a pass goes on to the same stack', async ({ page, baseURL }) => {
  test.setTimeout(180_000)
  await signIn(page, baseURL!, 'member')
  await openCapture(page, filesOf('ser'))
  await expect(page.getByText(/frames · |Scoring and registering|Stacking|better reference/).first()).toBeVisible({ timeout: 30_000 })
  await page.reload()
  await ready(page)
  await page.getByLabel('Open a capture').setInputFiles(filesOf('ser'))
  await finished(page)
  const figures = await page.getByRole('region', { name: 'Figures', exact: true }).getByRole('table').innerText()
  // The same again, with everything there: the figures are the same, and no pass is computed.
  await page.reload()
  await ready(page)
  await expect(page.getByRole('heading', { name: 'Go on where you were' })).toBeVisible()
  await page.getByLabel('Open a capture').setInputFiles(filesOf('ser'))
  await finished(page)
  await expect(page.getByRole('region', { name: 'Figures', exact: true }).getByRole('table')).toHaveText(figures.replaceAll(/\s+/g, ' '), { useInnerText: true, timeout: 10_000 }).catch(async () => {
    expect((await page.getByRole('region', { name: 'Figures', exact: true }).getByRole('table').innerText())).toBe(figures)
  })
  const computed = await page.evaluate(() => performance.getEntriesByType('measure').map(({ name }) => name).filter(name => name === 'lull.grade'))
  expect(computed).toEqual([])
})

test('every kind of bad file gets its own message, and the next capture opens', async ({ page, baseURL }) => {
  test.setTimeout(180_000)
  await signIn(page, baseURL!, 'member')
  await open(page, '/bench')
  const messages = new Set<string>()
  const bad = captures.filter(capture => capture.problem !== null)
  for (const capture of bad) {
    await page.getByLabel(capture.files.length > 1 ? 'Open a capture' : 'Open a capture').setInputFiles(capture.files.map(name => join(folder, name)))
    const note = page.getByRole('alert').first()
    await expect(note, capture.key).toBeVisible()
    await expect.poll(async () => !messages.has((await note.textContent())!), { message: `${capture.key} says the same as another` }).toBe(true)
    messages.add((await note.textContent())!)
  }
  expect(messages.size).toBe(bad.length)
  await page.getByLabel('Open a capture').setInputFiles(filesOf('ser cut off'))
  await expect(page.getByText(/37 whole frames of the/).first()).toBeVisible({ timeout: 60_000 })
  await finished(page)
})

for (const key of ['fits cube', 'tiff pages', 'png folder']) {
  test(`opens ${key}`, async ({ page, baseURL }) => {
    await signIn(page, baseURL!, 'member')
    await openCapture(page, filesOf(key))
    await expect(page.getByText(/12 frames of 96 × 96/).first()).toBeVisible()
    await finished(page)
  })
}
