import { sendFile } from '../../../../utils/archive/download'
import type { FileRow } from '../../../../utils/archive/receive'
import { useDb } from '../../../../utils/db'
import { notFound } from '../../../../utils/errors'
import { idParam } from '../../../../utils/params'
import { requireLink } from '../../../../utils/review/links'
import { defineRoute } from '../../../../utils/route'

/** A guest gets every file but the raw capture. */
export default defineRoute({ access: 'anyone' }, async ({ event }) => {
  const link = await requireLink(event)
  const file = await useDb()('run_files').where({ id: idParam(event, 'fileId'), run_id: link.runId, state: 'received' }).whereNot({ role: 'raw' }).first() as FileRow | undefined
  if (!file) throw notFound()
  return sendFile(event, file, { guest: true })
})
