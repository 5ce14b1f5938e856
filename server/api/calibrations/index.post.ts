import { setResponseStatus } from 'h3'
import { calibrationBody } from '../../../shared/schemas/calibration'
import { createCalibration } from '../../utils/archive/calibrations'
import { defineRoute } from '../../utils/route'

export default defineRoute({ access: 'club.read', body: calibrationBody }, async ({ event, actor, body }) => {
  const answer = await createCalibration(actor, body)
  setResponseStatus(event, 201)
  return answer
})
