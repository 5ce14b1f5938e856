import { setResponseHeaders } from 'h3'
import { measureQuery } from '../../../shared/api/measures'
import { measuresCsv, measureTable } from '../../utils/archive/measures'
import { defineRoute } from '../../utils/route'

/** The table as CSV, with units in its header. */
export default defineRoute({ access: 'club.read', query: measureQuery }, async ({ event, actor, query }) => {
  const table = await measureTable(actor, query)
  setResponseHeaders(event, { 'Content-Type': 'text/csv; charset=utf-8', 'Content-Disposition': 'attachment; filename="measures.csv"' })
  return measuresCsv(table)
})
