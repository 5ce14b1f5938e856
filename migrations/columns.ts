/** Columns that many tables share. Ids are 128-bit random, base64url; times are UTC with milliseconds. */
import type { Knex } from 'knex'

type Table = Knex.CreateTableBuilder

/** Ids and hashes compare byte by byte, whatever the collation of texts. */
export function idColumn(knex: Knex, table: Table, name = 'id') {
  return table.specificType(name, 'varchar(64) character set ascii collate ascii_bin')
}

export function timeColumn(table: Table, name: string) {
  return table.specificType(name, 'datetime(3)')
}

export function reference(knex: Knex, table: Table, name: string, other: string, onDelete: 'CASCADE' | 'RESTRICT' | 'SET NULL' = 'RESTRICT') {
  const column = idColumn(knex, table, name)
  table.foreign(name).references('id').inTable(other).onDelete(onDelete)
  return column
}
