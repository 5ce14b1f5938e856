import { runDetail } from '../../../utils/archive/read'
import { idParam } from '../../../utils/params'
import { defineRoute } from '../../../utils/route'

export default defineRoute({ access: 'club.read' }, ({ event, actor }) => runDetail(actor, idParam(event, 'id')))
