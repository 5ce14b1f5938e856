import { invitationBody } from '../../../../shared/api/account'
import { invite } from '../../../utils/accounts/club'
import { defineRoute } from '../../../utils/route'

export default defineRoute({ access: 'invitations', body: invitationBody }, ({ actor, body }) => invite(actor, body))
