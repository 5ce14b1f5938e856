import { setResponseStatus } from 'h3'
import { idParam } from '../../../utils/params'
import { deleteRecipe } from '../../../utils/recipes/recipes'
import { defineRoute } from '../../../utils/route'

export default defineRoute({ access: 'club.read' }, async ({ event, actor }) => {
  await deleteRecipe(actor, idParam(event, 'id'))
  setResponseStatus(event, 204)
  return null
})
