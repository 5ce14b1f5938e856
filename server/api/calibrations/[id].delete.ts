import { setResponseStatus } from 'h3'
import { deleteCalibration } from '../../utils/archive/calibrations'
import { idParam } from '../../utils/params'
import { defineRoute } from '../../utils/route'

export default defineRoute({ access: 'club.read' }, async ({ event, actor }) => {
  await deleteCalibration(actor, idParam(event, 'id'))
  setResponseStatus(event, 204)
  return null
})
