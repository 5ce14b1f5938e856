/** Share links, reviews, pins, remarks and proposals. */
import type { Knex } from 'knex'
import { idColumn, reference, timeColumn } from './columns'

export async function up(knex: Knex): Promise<void> {
  await knex.schema.createTable('share_links', (table) => {
    idColumn(knex, table).primary()
    reference(knex, table, 'run_id', 'runs', 'CASCADE').notNullable()
    idColumn(knex, table, 'token_hash').notNullable().unique()
    table.string('scope', 8).notNullable()
    reference(knex, table, 'created_by', 'users').notNullable()
    timeColumn(table, 'created_at').notNullable()
    timeColumn(table, 'expires_at').notNullable()
    timeColumn(table, 'withdrawn_at')
    timeColumn(table, 'last_used_at')
  })
  await knex.schema.createTable('reviews', (table) => {
    idColumn(knex, table).primary()
    reference(knex, table, 'run_id', 'runs', 'CASCADE').notNullable()
    reference(knex, table, 'asked_by', 'users').notNullable()
    timeColumn(table, 'asked_at').notNullable()
    table.text('text').notNullable()
    table.string('verdict', 16)
    reference(knex, table, 'verdict_by', 'users').nullable()
    timeColumn(table, 'verdict_at')
    table.text('verdict_text').notNullable()
    table.index(['verdict', 'asked_at'])
  })
  const authored = (table: Knex.CreateTableBuilder) => {
    reference(knex, table, 'run_id', 'runs', 'CASCADE').notNullable()
    reference(knex, table, 'author_id', 'users').nullable()
    // The name a guest gave; a member's name is looked up.
    table.string('guest_name', 100)
    timeColumn(table, 'at').notNullable()
    table.text('text').notNullable()
  }
  await knex.schema.createTable('pins', (table) => {
    idColumn(knex, table).primary()
    authored(table)
    table.integer('number').notNullable()
    table.double('x').notNullable()
    table.double('y').notNullable()
    table.unique(['run_id', 'number'])
  })
  await knex.schema.createTable('remarks', (table) => {
    idColumn(knex, table).primary()
    authored(table)
    reference(knex, table, 'pin_id', 'pins', 'CASCADE').nullable()
  })
  await knex.schema.createTable('proposals', (table) => {
    idColumn(knex, table).primary()
    authored(table)
    table.text('recipe', 'longtext').notNullable()
  })
}

export async function down(knex: Knex): Promise<void> {
  for (const table of ['proposals', 'remarks', 'pins', 'reviews', 'share_links']) await knex.schema.dropTable(table)
}
