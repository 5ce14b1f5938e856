import { setResponseHeaders } from 'h3'
import { runQuery } from '../../../shared/api/archive'
import { runsCsv } from '../../utils/archive/csv'
import { findRuns, summariesOf } from '../../utils/archive/read'
import { defineRoute } from '../../utils/route'

const MAX_ROWS = 20_000

/** The filtered list in its order, all pages of it. */
export default defineRoute({ access: 'club.read', query: runQuery }, async ({ event, actor, query }) => {
  const rows = await findRuns(actor, { ...query, page: 1 }, MAX_ROWS)
  setResponseHeaders(event, { 'Content-Type': 'text/csv; charset=utf-8', 'Content-Disposition': 'attachment; filename="runs.csv"' })
  return runsCsv(await summariesOf(rows))
})
