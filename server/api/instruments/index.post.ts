import { setResponseStatus } from 'h3'
import { instrumentBody } from '../../../shared/api/archive'
import { createInstrument } from '../../utils/archive/instruments'
import { defineRoute } from '../../utils/route'

export default defineRoute({ access: 'club.read', body: instrumentBody }, async ({ event, actor, body }) => {
  const answer = await createInstrument(actor, body)
  setResponseStatus(event, 201)
  return answer
})
