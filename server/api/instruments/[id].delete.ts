import { setResponseStatus } from 'h3'
import { deleteInstrument } from '../../utils/archive/instruments'
import { idParam } from '../../utils/params'
import { defineRoute } from '../../utils/route'

export default defineRoute({ access: 'club.read' }, async ({ event, actor }) => {
  await deleteInstrument(actor, idParam(event, 'id'))
  setResponseStatus(event, 204)
  return null
})
