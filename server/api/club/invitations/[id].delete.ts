import { setResponseStatus } from 'h3'
import { withdrawInvitation } from '../../../utils/accounts/club'
import { idParam } from '../../../utils/params'
import { defineRoute } from '../../../utils/route'

export default defineRoute({ access: 'invitations' }, async ({ event, actor }) => {
  await withdrawInvitation(actor, idParam(event, 'id'))
  setResponseStatus(event, 204)
  return null
})
