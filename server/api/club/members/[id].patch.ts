import { memberBody } from '../../../../shared/api/account'
import { changeMember } from '../../../utils/accounts/club'
import { idParam } from '../../../utils/params'
import { defineRoute } from '../../../utils/route'

export default defineRoute({ access: 'members.write', body: memberBody }, ({ event, actor, body }) => changeMember(actor, idParam(event, 'id'), body))
