/** Every page in every theme without findings of axe (WCAG 2.2 and good practice), and no page wider than its window. */
import { decode } from 'fast-png'
import { memberPlaces, publicPlaces, type Place } from './lib/places'
import { axeFindings, expect, open, setTheme, signIn, sizes, test, themes } from './lib/test'

test.describe.configure({ timeout: 300_000 })

async function walk(page: import('@playwright/test').Page, places: Place[], visit: (place: Place) => Promise<string[]>) {
  const findings: string[] = []
  for (const place of places) {
    await open(page, place.path)
    await page.waitForLoadState('networkidle')
    findings.push(...(await visit(place)).map(text => `${place.name}: ${text}`))
  }
  return findings
}

/** How far the page is wider than its window, px. */
const overflow = (page: import('@playwright/test').Page) => page.evaluate(() => document.documentElement.scrollWidth - window.innerWidth)

for (const theme of themes) {
  test(`axe finds nothing, ${theme} theme, signed out`, async ({ page, context, baseURL, guard }) => {
    guard.allow(/status of 404.*\/nowhere/)
    await setTheme(context, baseURL!, theme)
    expect(await walk(page, publicPlaces, () => axeFindings(page))).toEqual([])
  })

  test(`axe finds nothing, ${theme} theme, signed in`, async ({ page, context, baseURL }) => {
    await setTheme(context, baseURL!, theme)
    await signIn(page, baseURL!, 'organiser')
    expect(await walk(page, await memberPlaces(page), () => axeFindings(page))).toEqual([])
  })
}

for (const [name, size] of Object.entries(sizes)) {
  test(`no page is wider than a ${name} window`, async ({ page, baseURL, guard }) => {
    guard.allow(/status of 404.*\/nowhere/)
    await page.setViewportSize(size)
    const wide = async () => ((await overflow(page)) > 0 ? [`is ${await overflow(page)} px too wide`] : [])
    const findings = await walk(page, publicPlaces, wide)
    await signIn(page, baseURL!, 'organiser')
    findings.push(...await walk(page, await memberPlaces(page), wide))
    expect(findings).toEqual([])
  })
}

test('the red theme lights neither green nor blue', async ({ page, context, baseURL, guard }) => {
  guard.allow(/status of 404.*\/nowhere/)
  await setTheme(context, baseURL!, 'red')
  const wrong = async () => {
    const { data, channels } = decode(await page.screenshot({ fullPage: true }))
    let lit = 0
    for (let at = 0; at < data.length; at += channels) if (data[at + 1]! > 0 || data[at + 2]! > 0) lit++
    return lit > 0 ? [`${lit} pixels with green or blue in them`] : []
  }
  const findings = await walk(page, publicPlaces, wrong)
  await signIn(page, baseURL!, 'organiser')
  findings.push(...await walk(page, await memberPlaces(page), wrong))
  expect(findings).toEqual([])
})
