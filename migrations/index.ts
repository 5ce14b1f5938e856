/**
 * The list of migrations, in order. Static, so that the built server carries them and scripts use the same;
 * see DEVELOPERS.md, "A new table".
 */
import type { Knex } from 'knex'
import * as club from './0001_club'
import * as archive from './0002_archive'
import * as review from './0003_review'
import * as calibrations from './0004_calibrations'
import * as measures from './0005_measures'

export interface Migration { up(knex: Knex): Promise<void>, down(knex: Knex): Promise<void> }

const migrations: { name: string, migration: Migration }[] = [
  { name: '0001_club', migration: club },
  { name: '0002_archive', migration: archive },
  { name: '0003_review', migration: review },
  { name: '0004_calibrations', migration: calibrations },
  { name: '0005_measures', migration: measures },
]

export const migrationSource: Knex.MigrationSource<typeof migrations[number]> = {
  getMigrations: () => Promise.resolve(migrations),
  getMigrationName: ({ name }) => name,
  getMigration: ({ migration }) => Promise.resolve(migration),
}
