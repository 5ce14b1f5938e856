/** The archive's question, held by the URL: what is default is left out, what makes no sense is ignored. */
import type { LocationQueryRaw } from 'vue-router'
import { runQuery, type RunQuery } from '~~/shared/api/archive'

export type ArchiveQuery = ReturnType<typeof runQuery.parse>
const fallback = runQuery.parse({})

/** Query of a URL as a question to the server; each field that cannot be understood falls back to its default. */
export function readArchiveQuery(query: Record<string, unknown>): ArchiveQuery {
  const fields = runQuery.shape
  const good: Record<string, unknown> = {}
  for (const [name, schema] of Object.entries(fields)) {
    const raw = query[name]
    if (typeof raw !== 'string' || raw === '') continue
    const parsed = schema.safeParse(raw)
    if (parsed.success) good[name] = parsed.data
  }
  return { ...fallback, ...good } as ArchiveQuery
}

/** The other way: only what differs from the defaults. */
export function writeArchiveQuery(query: RunQuery): LocationQueryRaw {
  const result: LocationQueryRaw = {}
  for (const [name, value] of Object.entries(query)) {
    if (value === undefined || value === null || value === '' || value === fallback[name as keyof ArchiveQuery]) continue
    result[name] = String(value)
  }
  return result
}

export function useArchiveQuery() {
  const route = useRoute()
  const query = computed(() => readArchiveQuery(route.query))
  /** Changes the question; every change but that of the page starts at the first page again. */
  const change = (changes: Partial<Record<keyof RunQuery, unknown>>) => navigateTo({
    path: route.path,
    query: writeArchiveQuery({ ...query.value, ...('page' in changes ? {} : { page: 1 }), ...changes } as RunQuery),
  }, { replace: !('page' in changes) })
  return { query, change }
}
