/** Every page of Lull with something to show, for tests that walk all of them. */
import type { Page } from '@playwright/test'
import type { RecipeSummary, RunPage } from '../../../shared/api/archive'
import { ask } from './test'

export interface Place { name: string, path: string, missing?: boolean }

export const publicPlaces: Place[] = [
  { name: 'landing', path: '/' },
  { name: 'sign in', path: '/sign-in' },
  { name: 'sign in, on the way', path: '/sign-in?next=/archive' },
  { name: 'forgotten password', path: '/forgot' },
  { name: 'new password', path: '/reset?token=abcdefghijklmnopqrstuvwx' },
  { name: 'new password, no token', path: '/reset' },
  { name: 'invitation that is over', path: '/register?token=abcdefghijklmnopqrstuvwx' },
  { name: 'link that is over', path: '/s/abcdefghijklmnopqrstuvwx' },
  { name: 'nothing here', path: '/nowhere', missing: true },
]

/** Pages of the one who is signed in; the demo must hold a filed run under review and two recipes. */
export async function memberPlaces(page: Page): Promise<Place[]> {
  const waiting = await ask<RunPage>(page, '/api/runs?review=waiting&pageSize=1')
  const run = waiting.items[0]
  if (!run) throw new Error('The demo holds no run that waits for a mentor.')
  const recipes = await ask<RecipeSummary[]>(page, '/api/recipes')
  if (recipes.length < 2) throw new Error('The demo holds fewer than two recipes.')
  return [
    { name: 'what waits', path: '/' },
    { name: 'bench', path: '/bench' },
    { name: 'archive', path: '/archive' },
    { name: 'archive, nothing found', path: '/archive?search=no-such-thing-anywhere' },
    { name: 'archive, unfinished', path: '/archive?state=announced' },
    { name: 'archive, deleted', path: '/archive?state=deleted' },
    { name: 'run', path: `/runs/${run.id}` },
    { name: 'run on the bench', path: `/runs/${run.id}/review` },
    { name: 'measures', path: '/measures' },
    { name: 'recipes', path: '/recipes' },
    { name: 'recipe', path: `/recipes/${recipes[0]!.id}` },
    { name: 'recipes compared', path: `/recipes/compare?a=${recipes[0]!.id}.1&b=${recipes[1]!.id}.1` },
    { name: 'reviews', path: '/reviews' },
    { name: 'reviews, done', path: '/reviews?state=done' },
    { name: 'club', path: '/club' },
    { name: 'instruments', path: '/club/instruments' },
    { name: 'mail', path: '/club/mail' },
    { name: 'audit trail', path: '/club/trail' },
    { name: 'account', path: '/account' },
  ]
}
