import { setResponseStatus } from 'h3'
import { remarkBody } from '../../../../shared/api/archive'
import { clientAddress, countAttempt } from '../../../utils/limits'
import { addRemark } from '../../../utils/review/discussion'
import { guestAuthor, requireLink } from '../../../utils/review/links'
import { defineRoute } from '../../../utils/route'

export default defineRoute({ access: 'anyone', body: remarkBody }, async ({ event, body }) => {
  const link = await requireLink(event)
  const author = guestAuthor(link, body.guestName)
  await countAttempt(event, 'guest-remark', `${link.runId} ${clientAddress(event)}`)
  const answer = await addRemark(author, link.runId, body)
  setResponseStatus(event, 201)
  return answer
})
