import { listRecipes } from '../../utils/recipes/recipes'
import { defineRoute } from '../../utils/route'

export default defineRoute({ access: 'club.read' }, ({ actor }) => listRecipes(actor))
