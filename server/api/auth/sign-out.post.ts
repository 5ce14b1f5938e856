import { setResponseStatus } from 'h3'
import { defineRoute } from '../../utils/route'
import { endSession } from '../../utils/session'

export default defineRoute({ access: 'anyone' }, async ({ event }) => {
  await endSession(event)
  setResponseStatus(event, 204)
  return null
})
