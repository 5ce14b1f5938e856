import { setResponseStatus } from 'h3'
import { forkBody } from '../../../../shared/api/archive'
import { idParam } from '../../../utils/params'
import { forkRecipe } from '../../../utils/recipes/recipes'
import { defineRoute } from '../../../utils/route'

export default defineRoute({ access: 'club.read', body: forkBody }, async ({ event, actor, body }) => {
  const answer = await forkRecipe(actor, idParam(event, 'id'), body)
  setResponseStatus(event, 201)
  return answer
})
