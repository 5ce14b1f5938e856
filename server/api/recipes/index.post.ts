import { setResponseStatus } from 'h3'
import { recipeBody } from '../../../shared/api/archive'
import { createRecipe } from '../../utils/recipes/recipes'
import { defineRoute } from '../../utils/route'

export default defineRoute({ access: 'club.read', body: recipeBody }, async ({ event, actor, body }) => {
  const answer = await createRecipe(actor, body)
  setResponseStatus(event, 201)
  return answer
})
