import { setResponseStatus } from 'h3'
import { proposalBody } from '../../../../shared/api/archive'
import { idParam } from '../../../utils/params'
import { propose } from '../../../utils/review/discussion'
import { defineRoute } from '../../../utils/route'

export default defineRoute({ access: 'club.read', body: proposalBody }, async ({ event, actor, body }) => {
  const answer = await propose(actor, idParam(event, 'id'), body)
  setResponseStatus(event, 201)
  return answer
})
