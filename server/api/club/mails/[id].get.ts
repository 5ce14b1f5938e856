import { readMail } from '../../../utils/accounts/club'
import { idParam } from '../../../utils/params'
import { defineRoute } from '../../../utils/route'

export default defineRoute({ access: 'mails.read' }, ({ event, actor }) => readMail(actor, idParam(event, 'id')))
