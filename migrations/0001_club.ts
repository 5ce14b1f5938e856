/** People, their club, sessions, invitations, mail and the audit trail. */
import type { Knex } from 'knex'
import { idColumn, reference, timeColumn } from './columns'

export async function up(knex: Knex): Promise<void> {
  await knex.schema.createTable('clubs', (table) => {
    idColumn(knex, table).primary()
    table.string('name', 120).notNullable()
    table.bigInteger('quota_bytes').notNullable()
    timeColumn(table, 'created_at').notNullable()
  })
  await knex.schema.createTable('users', (table) => {
    idColumn(knex, table).primary()
    table.string('email', 254).notNullable().unique()
    table.string('name', 100).notNullable()
    table.string('password_hash', 255).notNullable()
    timeColumn(table, 'created_at').notNullable()
    timeColumn(table, 'last_seen_at')
  })
  await knex.schema.createTable('memberships', (table) => {
    reference(knex, table, 'club_id', 'clubs').notNullable()
    reference(knex, table, 'user_id', 'users').notNullable()
    table.string('role', 16).notNullable()
    table.boolean('active').notNullable().defaultTo(true)
    timeColumn(table, 'joined_at').notNullable()
    table.primary(['club_id', 'user_id'])
    table.unique(['user_id'])
  })
  await knex.schema.createTable('sessions', (table) => {
    idColumn(knex, table).primary()
    reference(knex, table, 'user_id', 'users', 'CASCADE').notNullable()
    timeColumn(table, 'created_at').notNullable()
    timeColumn(table, 'seen_at').notNullable()
  })
  await knex.schema.createTable('invitations', (table) => {
    idColumn(knex, table).primary()
    reference(knex, table, 'club_id', 'clubs').notNullable()
    table.string('email', 254).notNullable()
    table.string('role', 16).notNullable()
    idColumn(knex, table, 'token_hash').notNullable().unique()
    reference(knex, table, 'invited_by', 'users').nullable()
    timeColumn(table, 'created_at').notNullable()
    timeColumn(table, 'expires_at').notNullable()
    timeColumn(table, 'used_at')
  })
  await knex.schema.createTable('password_resets', (table) => {
    idColumn(knex, table).primary()
    reference(knex, table, 'user_id', 'users', 'CASCADE').notNullable()
    idColumn(knex, table, 'token_hash').notNullable().unique()
    timeColumn(table, 'created_at').notNullable()
    timeColumn(table, 'expires_at').notNullable()
    timeColumn(table, 'used_at')
  })
  await knex.schema.createTable('mails', (table) => {
    idColumn(knex, table).primary()
    reference(knex, table, 'club_id', 'clubs').nullable()
    table.string('recipient', 254).notNullable()
    table.string('subject', 250).notNullable()
    table.text('body').notNullable()
    table.string('state', 8).notNullable()
    table.string('error', 500)
    timeColumn(table, 'created_at').notNullable()
    timeColumn(table, 'sent_at')
    table.index(['club_id', 'created_at'])
    table.index(['state', 'created_at'])
  })
  await knex.schema.createTable('audit_events', (table) => {
    idColumn(knex, table).primary()
    reference(knex, table, 'club_id', 'clubs').nullable()
    idColumn(knex, table, 'user_id')
    table.string('actor', 120).notNullable()
    table.string('action', 64).notNullable()
    /** What it was done to: a kind ("run") and an id. */
    table.string('subject_kind', 32).notNullable()
    idColumn(knex, table, 'subject_id')
    table.string('detail', 500).notNullable().defaultTo('')
    timeColumn(table, 'at').notNullable()
    table.index(['club_id', 'at'])
    table.index(['subject_kind', 'subject_id', 'at'])
  })
  /** Counters of rate-limiter-flexible. */
  await knex.schema.createTable('rate_limits', (table) => {
    table.string('key', 255).primary()
    table.integer('points').notNullable().defaultTo(0)
    table.bigInteger('expire').unsigned()
  })
}

export async function down(knex: Knex): Promise<void> {
  for (const table of ['rate_limits', 'audit_events', 'mails', 'password_resets', 'invitations', 'sessions', 'memberships', 'users', 'clubs']) await knex.schema.dropTable(table)
}
