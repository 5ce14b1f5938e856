import { fileRun } from '../../../utils/archive/change'
import { idParam } from '../../../utils/params'
import { defineRoute } from '../../../utils/route'

export default defineRoute({ access: 'club.read' }, ({ event, actor }) => fileRun(actor, idParam(event, 'id')))
