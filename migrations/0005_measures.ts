/** The measure of a run beside its result, so that tables of measures need not read every result. */
import type { Knex } from 'knex'

export async function up(knex: Knex): Promise<void> {
  await knex.schema.alterTable('runs', (table) => {
    table.text('measure', 'longtext').nullable()
  })
}

export async function down(knex: Knex): Promise<void> {
  await knex.schema.alterTable('runs', (table) => {
    table.dropColumn('measure')
  })
}
