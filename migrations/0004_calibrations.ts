/** Scale and orientation of instruments, as their owners measured them. */
import type { Knex } from 'knex'
import { idColumn, reference, timeColumn } from './columns'

export async function up(knex: Knex): Promise<void> {
  await knex.schema.createTable('calibrations', (table) => {
    idColumn(knex, table).primary()
    reference(knex, table, 'club_id', 'clubs').notNullable()
    reference(knex, table, 'owner_id', 'users').notNullable()
    reference(knex, table, 'instrument_id', 'instruments', 'SET NULL').nullable()
    table.string('name', 120).notNullable()
    table.text('data').notNullable()
    timeColumn(table, 'created_at').notNullable()
    timeColumn(table, 'deleted_at')
    table.index(['club_id', 'created_at'])
  })
}

export async function down(knex: Knex): Promise<void> {
  await knex.schema.dropTable('calibrations')
}
