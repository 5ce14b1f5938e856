import { sendFile } from '../../../../utils/archive/download'
import { findRun } from '../../../../utils/archive/read'
import type { FileRow } from '../../../../utils/archive/receive'
import { useDb } from '../../../../utils/db'
import { notFound } from '../../../../utils/errors'
import { idParam } from '../../../../utils/params'
import { defineRoute } from '../../../../utils/route'

export default defineRoute({ access: 'club.read' }, async ({ event, actor }) => {
  const run = await findRun(actor, idParam(event, 'id'))
  const file = await useDb()('run_files').where({ id: idParam(event, 'fileId'), run_id: run.id, state: 'received' }).first() as FileRow | undefined
  if (!file) throw notFound()
  return sendFile(event, file)
})
