import { setResponseStatus } from 'h3'
import { recipeVersionBody } from '../../../../shared/api/archive'
import { idParam } from '../../../utils/params'
import { addVersion } from '../../../utils/recipes/recipes'
import { defineRoute } from '../../../utils/route'

export default defineRoute({ access: 'club.read', body: recipeVersionBody }, async ({ event, actor, body }) => {
  const answer = await addVersion(actor, idParam(event, 'id'), body)
  setResponseStatus(event, 201)
  return answer
})
