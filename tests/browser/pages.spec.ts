/** What people do on the pages around the bench: sign in and go on, find a run, share it, judge it. */
import type { Page } from '@playwright/test'
import type { RunPage, RunSummary } from '../../shared/api/archive'
import { demoPeople } from '../../shared/demo'
import { ask, expect, open, ready, signIn, test } from './lib/test'

const person = (role: string) => demoPeople.find(each => each.role === role)!

async function fillSignIn(page: Page, email: string, password: string) {
  await page.getByLabel('E-mail address').fill(email)
  await page.getByRole('textbox', { name: 'Password' }).fill(password)
  await page.getByRole('button', { name: 'Sign in' }).click()
}

/** A filed run of somebody, from the archive as they see it. */
async function runOf(page: Page, owner: string): Promise<RunSummary> {
  const { items } = await ask<RunPage>(page, '/api/runs?pageSize=100')
  const run = items.find(each => each.owner.name === owner)
  if (!run) throw new Error(`The demo holds no filed run of ${owner}.`)
  return run
}

test('a page that needs a sign-in asks for it and comes back; a wrong password is said plainly', async ({ page, guard }) => {
  guard.allow(/status of 401/)
  const { email, password, name } = person('mentor')
  await open(page, '/archive?review=waiting')
  await expect(page).toHaveURL(/\/sign-in\?next=/)
  await fillSignIn(page, email, 'not the right password')
  await expect(page.getByRole('alert')).toContainText('do not belong together')
  await fillSignIn(page, email, password)
  await expect(page).toHaveURL(/\/archive\?review=waiting$/)
  await page.getByRole('button', { name: `Menu of ${name}` }).click()
  await page.getByRole('button', { name: 'Sign out' }).click()
  await expect(page).toHaveURL(/\/sign-in$/)
  await open(page, '/archive')
  await expect(page).toHaveURL(/\/sign-in\?next=/)
})

test('the archive is a sentence: its words filter, by keyboard alone, and the address keeps them', async ({ page, baseURL }) => {
  await signIn(page, baseURL!, 'organiser')
  await open(page, '/archive')
  const all = await ask<RunPage>(page, '/api/runs')
  await expect(page.getByRole('status').filter({ hasText: 'on' }).first()).toContainText(`${all.total} runs`)
  const word = page.getByRole('button', { name: /^State of review/ })
  await word.focus()
  await page.keyboard.press('Enter')
  await expect(page.getByRole('listbox', { name: 'State of review' })).toBeFocused()
  await page.keyboard.press('w')
  await page.keyboard.press('Enter')
  await expect(page).toHaveURL(/review=waiting/)
  await expect(word).toBeFocused()
  const waiting = await ask<RunPage>(page, '/api/runs?review=waiting')
  await expect(page.locator('tbody tr')).toHaveCount(waiting.total)
  await page.reload()
  await ready(page)
  await expect(page.locator('tbody tr')).toHaveCount(waiting.total)
  await page.getByRole('searchbox').fill('no such thing anywhere')
  await expect(page.getByText('No run fits this sentence.')).toBeVisible()
  await page.getByRole('button', { name: 'Show all runs' }).click()
  await expect(page.locator('tbody tr')).toHaveCount(Math.min(25, all.total))
  await page.getByRole('columnheader', { name: /Night/ }).getByRole('button').click()
  await expect(page).toHaveURL(/sort=night/)
  await expect(page.getByRole('columnheader', { name: /Night/ })).toHaveAttribute('aria-sort', 'descending')
})

test('a guest of a link sees the filed stack, moves the slider, pins a remark by keyboard, until the link is withdrawn', async ({ page, browser, baseURL, context, guard }) => {
  guard.allow(/status of 404.*\/api\/share\//)
  await context.grantPermissions(['clipboard-write'])
  await signIn(page, baseURL!, 'member')
  const me = demoPeople.find(each => each.role === 'member')!
  const run = await runOf(page, me.name)
  await open(page, `/runs/${run.id}`)
  await page.getByRole('button', { name: 'Share a link' }).click()
  await page.getByRole('button', { name: 'Make a link' }).click()
  const address = await page.getByLabel('The link', { exact: true }).inputValue()
  expect(new URL(address).pathname).toMatch(/^\/s\/[\w-]{40,}$/)

  const guestContext = await browser.newContext({ baseURL: baseURL! })
  const guest = await guestContext.newPage()
  await open(guest, new URL(address).pathname)
  await expect(guest.locator('canvas').first()).toBeVisible()
  await expect(guest.getByText(`${run.keep.count.toLocaleString('en-GB')} of`)).toBeVisible()
  await expect(guest.getByText('The stack is on its way.')).toBeHidden()
  const slider = guest.getByRole('slider', { name: 'Keep' })
  const before = await slider.getAttribute('aria-valuetext')
  expect(before).toMatch(/^[\d.]+ percent, [\d,]+ of [\d,]+ frames$/)
  await slider.focus()
  await guest.keyboard.press('ArrowLeft')
  await expect(slider).not.toHaveAttribute('aria-valuetext', before!)
  const picture = guest.getByRole('application')
  await picture.focus()
  await guest.keyboard.press('Shift+ArrowRight')
  await guest.keyboard.press('Enter')
  const text = `Seen from outside, ${Date.now()}`
  await guest.getByLabel(/^A pin at x/).fill(text)
  await guest.getByLabel('Your name').fill('Visiting Friend')
  await guest.getByRole('button', { name: 'Set the pin' }).click()
  await expect(guest.getByText(text)).toBeVisible()
  await expect(guest.getByRole('link', { name: 'Archive' })).toHaveCount(0)

  await page.getByRole('button', { name: 'Withdraw' }).first().click()
  await expect(page.getByText('The link is withdrawn.')).toBeVisible()
  await guest.reload()
  await expect(guest.getByRole('heading', { name: 'This link opens nothing any more.' })).toBeVisible()
  await guestContext.close()
  await open(page, `/runs/${run.id}`)
  await expect(page.getByText(text)).toBeVisible()
})

test('a mentor proposes another keep fraction; the owner sees it as tracked changes', async ({ page, browser, baseURL }) => {
  await signIn(page, baseURL!, 'mentor')
  const waiting = await ask<RunPage>(page, '/api/runs?review=waiting')
  const run = waiting.items.find(each => each.owner.name !== person('mentor').name)!
  await open(page, `/runs/${run.id}/review`)
  await expect(page.getByRole('button', { name: 'Accept' })).toBeVisible()
  await page.getByRole('button', { name: 'Propose a change' }).click()
  await page.getByRole('button', { name: /^Keep fraction/ }).click()
  const wanted = run.keep.fraction === 0.07 ? '6' : '7'
  await page.getByLabel('Keep fraction, %').fill(wanted)
  await page.getByRole('button', { name: 'Set', exact: true }).click()
  await expect(page.getByText('Changes keep fraction.')).toBeVisible()
  await page.getByLabel('Why').fill('Fewer frames, a calmer halo.')
  await page.getByRole('button', { name: 'Propose it' }).click()
  await expect(page.locator('ins')).toContainText(`${wanted} %`)

  const owner = demoPeople.find(each => each.name === run.owner.name)!
  const ownContext = await browser.newContext({ baseURL: baseURL! })
  const own = await ownContext.newPage()
  await own.request.post('/api/auth/sign-in', { data: { email: owner.email, password: owner.password }, headers: { origin: new URL(baseURL!).origin } })
  await open(own, `/runs/${run.id}/review`)
  await expect(own.locator('ins')).toContainText(`${wanted} %`)
  await expect(own.getByText('Fewer frames, a calmer halo.').first()).toBeVisible()
  await expect(own.getByRole('button', { name: 'Accept' })).toHaveCount(0)
  await ownContext.close()
})
