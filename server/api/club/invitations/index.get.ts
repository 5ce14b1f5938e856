import { listInvitations } from '../../../utils/accounts/club'
import { defineRoute } from '../../../utils/route'

export default defineRoute({ access: 'invitations' }, ({ actor }) => listInvitations(actor))
