import { setResponseStatus } from 'h3'
import { remarkBody } from '../../../../shared/api/archive'
import { findRun } from '../../../utils/archive/read'
import { idParam } from '../../../utils/params'
import { addRemark, memberAuthor } from '../../../utils/review/discussion'
import { defineRoute } from '../../../utils/route'

export default defineRoute({ access: 'club.read', body: remarkBody }, async ({ event, actor, body }) => {
  const run = await findRun(actor, idParam(event, 'id'))
  const answer = await addRemark(memberAuthor(actor), run.id, body)
  setResponseStatus(event, 201)
  return answer
})
