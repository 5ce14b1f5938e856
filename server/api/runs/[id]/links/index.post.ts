import { setResponseStatus } from 'h3'
import { linkBody } from '../../../../../shared/api/archive'
import { idParam } from '../../../../utils/params'
import { makeLink } from '../../../../utils/review/links'
import { defineRoute } from '../../../../utils/route'

export default defineRoute({ access: 'club.read', body: linkBody }, async ({ event, actor, body }) => {
  const answer = await makeLink(actor, idParam(event, 'id'), body)
  setResponseStatus(event, 201)
  return answer
})
