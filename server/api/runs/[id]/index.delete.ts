import { setResponseStatus } from 'h3'
import { deleteRun } from '../../../utils/archive/change'
import { idParam } from '../../../utils/params'
import { defineRoute } from '../../../utils/route'

export default defineRoute({ access: 'club.read' }, async ({ event, actor }) => {
  await deleteRun(actor, idParam(event, 'id'))
  setResponseStatus(event, 204)
  return null
})
