import { setResponseStatus } from 'h3'
import { askReviewBody } from '../../../../shared/api/archive'
import { idParam } from '../../../utils/params'
import { askReview } from '../../../utils/review/reviews'
import { defineRoute } from '../../../utils/route'

export default defineRoute({ access: 'club.read', body: askReviewBody }, async ({ event, actor, body }) => {
  const answer = await askReview(actor, idParam(event, 'id'), body)
  setResponseStatus(event, 201)
  return answer
})
