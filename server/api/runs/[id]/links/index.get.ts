import { idParam } from '../../../../utils/params'
import { listLinks } from '../../../../utils/review/links'
import { defineRoute } from '../../../../utils/route'

export default defineRoute({ access: 'club.read' }, ({ event, actor }) => listLinks(actor, idParam(event, 'id')))
