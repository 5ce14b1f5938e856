import { setResponseStatus } from 'h3'
import { targetBody } from '../../../shared/api/archive'
import { createTarget } from '../../utils/archive/instruments'
import { defineRoute } from '../../utils/route'

export default defineRoute({ access: 'club.read', body: targetBody }, async ({ event, actor, body }) => {
  const answer = await createTarget(actor, body)
  setResponseStatus(event, 201)
  return answer
})
