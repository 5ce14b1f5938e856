/** Whether the parts that Lull stands on answer. */
import { access, constants, mkdir } from 'node:fs/promises'
import { useDb } from './db'
import { storeFolder } from './folders'
import { isMigrated } from './migrate'

const PATIENCE_MS = 2500

export interface Health { ok: boolean, database: 'ok' | 'down' | 'migrating', store: 'ok' | 'down' }

export async function healthOf(): Promise<Health> {
  const [database, store] = await Promise.all([databaseState(), storeState()])
  return { ok: database === 'ok' && store === 'ok', database, store }
}

async function databaseState(): Promise<Health['database']> {
  if (!isMigrated()) return 'migrating'
  // The pool itself waits longer for a connection; whoever asks for health wants to know now.
  const slow = new Promise<'down'>(resolve => setTimeout(resolve, PATIENCE_MS, 'down').unref())
  const answer = useDb().raw('select 1').then(() => 'ok' as const, () => 'down' as const)
  return Promise.race([answer, slow])
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
