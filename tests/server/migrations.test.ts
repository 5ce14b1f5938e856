/** Every migration runs up, and down again, on a filled database. */
import type { Knex } from 'knex'
import { afterAll, beforeAll, expect, inject, it } from 'vitest'
import { migrationSource } from '../../migrations'
import { openDatabase } from '../../server/utils/db'

const NAME = 'lull_migrations'
let db: Knex

beforeAll(async () => {
  const admin = openDatabase(inject('lull').databaseUrl)
  await admin.raw(`drop database if exists ${NAME}`)
  await admin.raw(`create database ${NAME} character set utf8mb4 collate utf8mb4_unicode_ci`)
  await admin.destroy()
  db = openDatabase(inject('lull').databaseUrl.replace(/\/lull$/, `/${NAME}`))
})
afterAll(async () => {
  await db.raw(`drop database ${NAME}`)
  await db.destroy()
})

interface Column { name: string, type: string, length: number | null, nullable: string }

async function rows<T>(sql: string, values: string[] = []): Promise<T[]> {
  return (await db.raw(sql, values) as [T[]])[0]
}

async function tables(): Promise<string[]> {
  const all = await rows<{ name: string }>('select table_name as name from information_schema.tables where table_schema = database()')
  return all.map(({ name }) => name).filter(name => !name.startsWith('knex_')).sort()
}

/** Something that a column takes, by its type. */
function valueOf({ type, length }: Column): unknown {
  if (/char/.test(type)) return 'x'.repeat(Math.min(Number(length), 22))
  if (/text/.test(type)) return '{}'
  if (type === 'datetime') return new Date('2031-03-04T05:06:07.089Z')
  return type === 'date' ? '2031-03-04' : 1
}

/** One row in each empty table, every column filled; tables that are referred to come first. */
async function fill(): Promise<void> {
  const foreign = await rows<{ t: string, c: string, other: string, otherColumn: string }>('select table_name as t, column_name as c, referenced_table_name as other, referenced_column_name as otherColumn from information_schema.key_column_usage where table_schema = database() and referenced_table_name is not null')
  const waiting = new Set(await tables())
  const filled = new Set<string>()
  while (waiting.size) {
    const table = [...waiting].find(name => foreign.every(({ t, other }) => t !== name || other === name || filled.has(other)))
    if (!table) throw new Error(`Tables that refer to each other in a ring: ${[...waiting].join(', ')}`)
    waiting.delete(table)
    filled.add(table)
    if (await db(table).first()) continue
    const columns = await rows<Column>('select column_name as name, data_type as type, character_maximum_length as length, is_nullable as nullable from information_schema.columns where table_schema = database() and table_name = ?', [table])
    const row: Record<string, unknown> = {}
    for (const column of columns) {
      const link = foreign.find(({ t, c }) => t === table && c === column.name)
      row[column.name] = !link ? valueOf(column) : link.other === table ? null : (await db(link.other).first(link.otherColumn))[link.otherColumn]
    }
    await db(table).insert(row)
  }
}

it('runs up and down step by step, each time with rows in every table', async () => {
  const names = (await migrationSource.getMigrations([])).map(migration => migrationSource.getMigrationName(migration))
  expect(names.length).toBeGreaterThan(0)
  const tablesAfter: string[][] = [[]]
  for (let i = 0; i < names.length; i++) {
    await db.migrate.up({ migrationSource })
    await fill()
    tablesAfter.push(await tables())
  }
  for (let i = names.length - 1; i >= 0; i--) {
    await db.migrate.down({ migrationSource })
    expect(await tables()).toEqual(tablesAfter[i])
    await db.migrate.up({ migrationSource })
    expect(await tables()).toEqual(tablesAfter[i + 1])
    await fill()
    await db.migrate.down({ migrationSource })
  }
  expect(await tables()).toEqual([])
  await db.migrate.latest({ migrationSource })
  expect(await tables()).toEqual(tablesAfter.at(-1))
}, 120_000)
