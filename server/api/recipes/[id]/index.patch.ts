import { recipePatchBody } from '../../../../shared/api/archive'
import { idParam } from '../../../utils/params'
import { changeRecipe } from '../../../utils/recipes/recipes'
import { defineRoute } from '../../../utils/route'

export default defineRoute({ access: 'club.read', body: recipePatchBody }, ({ event, actor, body }) => changeRecipe(actor, idParam(event, 'id'), body))
