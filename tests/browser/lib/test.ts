/**
 * The test every browser spec uses. It fails on what a user would never see but we must: an error on the
 * console, a violation of the content security policy, a hydration mismatch, a request off the origin.
 */
import { readFileSync } from 'node:fs'
import { createRequire } from 'node:module'
import { expect, test as base, type BrowserContext, type Page } from '@playwright/test'
import { demoPeople } from '../../../shared/demo'

export { expect }
export type Role = typeof demoPeople[number]['role']
export const themes = ['dark', 'light', 'red'] as const
export const sizes = { desk: { width: 1440, height: 900 }, phone: { width: 390, height: 844 } } as const

export interface Guard {
  /** Trouble on the console that this test means to cause, for example a refused sign-in. */
  allow(pattern: RegExp): void
}

/** Browsers report a violation as an event; the page hands it to the console, where the guard listens. */
function reportViolations() {
  document.addEventListener('securitypolicyviolation', event => console.error(`Content security policy: ${event.violatedDirective} refused ${event.blockedURI}`))
}

export const test = base.extend<{ guard: Guard }>({
  guard: [async ({ context, baseURL }, use) => {
    const origin = new URL(baseURL!).origin
    const troubles: string[] = []
    const allowed: RegExp[] = []
    const note = (text: string) => troubles.push(text)
    await context.addInitScript(reportViolations)
    context.on('request', (request) => {
      const url = new URL(request.url())
      if (['http:', 'https:', 'ws:', 'wss:'].includes(url.protocol) && url.host !== new URL(origin).host) note(`request off the origin: ${request.url()}`)
    })
    const listen = (page: Page) => {
      page.on('pageerror', error => note(`uncaught on ${page.url()}: ${error.message}`))
      page.on('console', (message) => {
        const text = message.text()
        if (message.type() === 'error' || /hydration/i.test(text)) note(`console on ${page.url()}: ${text} ${message.location().url}`)
      })
    }
    context.pages().forEach(listen)
    context.on('page', listen)
    await use({ allow: pattern => allowed.push(pattern) })
    expect(troubles.filter(text => !allowed.some(pattern => pattern.test(text))), 'trouble behind the scenes').toEqual([])
  }, { auto: true }],
})

/** Waits until the page answers to clicks. */
export async function ready(page: Page) {
  await page.waitForFunction(() => (window as unknown as { useNuxtApp?: () => { isHydrating: boolean } }).useNuxtApp?.().isHydrating === false)
}

export async function open(page: Page, path: string) {
  const answer = await page.goto(path)
  await ready(page)
  return answer
}

export async function setTheme(context: BrowserContext, baseURL: string, theme: typeof themes[number]) {
  await context.addCookies([{ name: 'lull-theme', value: theme, url: baseURL }])
}

/** Signs somebody of the demo in through the API; the cookie stays in the context. */
export async function signIn(page: Page, baseURL: string, role: Role) {
  const { email, password } = demoPeople.find(person => person.role === role)!
  const answer = await page.request.post('/api/auth/sign-in', { data: { email, password }, headers: { origin: new URL(baseURL).origin } })
  expect(answer.status(), `sign-in of ${email}`).toBe(200)
}

/** A JSON answer of the API, asked with the cookies of the page. */
export async function ask<T>(page: Page, path: string): Promise<T> {
  const answer = await page.request.get(path)
  expect(answer.status(), path).toBe(200)
  return await answer.json() as T
}

const axeSource = readFileSync(createRequire(import.meta.url).resolve('axe-core/axe.min.js'), 'utf8')
interface Finding { id: string, impact: string | null, help: string, nodes: { target: unknown[], failureSummary?: string }[] }

/** All rules of axe on the page as it stands; returns what it finds, in a form that reads well in a failure. */
export async function axeFindings(page: Page): Promise<string[]> {
  await page.evaluate(axeSource)
  const violations = await page.evaluate(async () => {
    const { axe } = window as unknown as { axe: { run(): Promise<{ violations: Finding[] }> } }
    return (await axe.run()).violations
  })
  return violations.flatMap(finding => finding.nodes.map(node => `${finding.id} (${finding.impact}): ${node.target.join(' ')}: ${node.failureSummary ?? finding.help}`))
}
