import { idParam } from '../../../utils/params'
import { readRecipeDetail } from '../../../utils/recipes/recipes'
import { defineRoute } from '../../../utils/route'

export default defineRoute({ access: 'club.read' }, ({ event, actor }) => readRecipeDetail(actor, idParam(event, 'id')))
