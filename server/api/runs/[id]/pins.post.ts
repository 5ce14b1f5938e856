import { setResponseStatus } from 'h3'
import { pinBody } from '../../../../shared/api/archive'
import { findRun } from '../../../utils/archive/read'
import { idParam } from '../../../utils/params'
import { addPin, memberAuthor } from '../../../utils/review/discussion'
import { defineRoute } from '../../../utils/route'

export default defineRoute({ access: 'club.read', body: pinBody }, async ({ event, actor, body }) => {
  const run = await findRun(actor, idParam(event, 'id'))
  const answer = await addPin(memberAuthor(actor), run.id, body)
  setResponseStatus(event, 201)
  return answer
})
