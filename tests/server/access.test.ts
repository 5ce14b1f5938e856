/** The access table, walked: every route × method × actor. */
import { readdirSync } from 'node:fs'
import path from 'node:path'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { accessTable } from './access-table'
import { Client } from './client'
import { actorNames, closeTestDb, makeWorld, PASSWORD, type World } from './world'

const methods = ['get', 'head', 'post', 'put', 'patch', 'delete', 'options']

/** Method and route of every handler file, as Nitro reads their names. A file that names no method takes them all. */
function routesOfBuild(): { method: string, route: string }[] {
  return (['api', 'routes'] as const).flatMap((folder) => {
    const place = path.join(__dirname, '../../server', folder)
    let files: string[]
    try {
      files = readdirSync(place, { recursive: true, encoding: 'utf8' }).filter(name => name.endsWith('.ts'))
    }
    catch {
      files = []
    }
    return files.map((file) => {
      const parts = file.replaceAll(path.sep, '/').replace(/\.ts$/, '').split('.')
      const named = parts.length > 1 && methods.includes(parts.at(-1)!)
      const method = named ? parts.pop()!.toUpperCase() : '*'
      const words = parts.join('.').split('/').map(word => word.replace(/^\[\.\.\..*\]$/, '**').replaceAll(/\[([^\]]+)\]/g, ':$1')).filter((word, i, all) => !(word === 'index' && i === all.length - 1))
      return { method, route: `/${[...(folder === 'api' ? ['api'] : []), ...words].join('/')}` }
    })
  })
}

describe('every route of the build is in the access table', () => {
  it.each(routesOfBuild())('$method $route', ({ method, route }) => {
    expect(accessTable.some(row => row.route === route && (method === '*' || row.method === method))).toBe(true)
  })

  it('and the table names no route that is not in the build', () => {
    const built = routesOfBuild()
    const stale = accessTable.filter(row => !row.route.startsWith('/api/_auth/') && !built.some(({ method, route }) => row.route === route && (method === '*' || row.method === method)))
    expect(stale.map(({ method, route }) => `${method} ${route}`)).toEqual([])
  })
})

describe('access', () => {
  let world: World
  beforeAll(async () => {
    world = await makeWorld()
  })
  afterAll(closeTestDb)

  for (const row of accessTable) {
    it.each(actorNames)(`${row.method} ${row.route} by %s`, async (actor) => {
      const person = actor === 'anonymous' || actor === 'guest' ? null : world.people[actor]
      const client = row.ownSession && person ? await Client.signedIn(person.email, PASSWORD) : world.as(actor).copy()
      const { path: address, ...rest } = await row.ask(world, actor)
      const answer = await client.send(row.method, address, rest)
      expect({ status: answer.status, said: answer.status === row.expect[actor] ? '' : answer.text.slice(0, 300) }).toEqual({ status: row.expect[actor], said: '' })
    })
  }
})
