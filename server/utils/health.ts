/** Whether the parts that Lull stands on answer. */
import { access, constants, mkdir } from 'node:fs/promises'
import { useDb } from './db'
import { storeFolder } from './folders'
import { isMigrated } from './migrate'

export interface Health { ok: boolean, database: 'ok' | 'down' | 'migrating', store: 'ok' | 'down' }

export async function healthOf(): Promise<Health> {
  const [database, store] = await Promise.all([databaseState(), storeState()])
  return { ok: database === 'ok' && store === 'ok', database, store }
}

async function databaseState(): Promise<Health['database']> {
  if (!isMigrated()) return 'migrating'
  try {
    await useDb().raw('select 1').timeout(3000)
    return 'ok'
  }
  catch {
    return 'down'
  }
}

async function storeState(): Promise<Health['store']> {
  try {
    await mkdir(storeFolder(), { recursive: true })
    await access(storeFolder(), constants.R_OK | constants.W_OK)
    return 'ok'
  }
  catch {
    return 'down'
  }
}
