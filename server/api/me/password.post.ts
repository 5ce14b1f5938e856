import { setResponseStatus } from 'h3'
import { changePasswordBody } from '../../../shared/api/account'
import { changePassword } from '../../utils/accounts/people'
import { defineRoute } from '../../utils/route'

export default defineRoute({ access: 'signed-in', body: changePasswordBody }, async ({ event, actor, body }) => {
  await changePassword(event, actor, body)
  setResponseStatus(event, 204)
  return null
})
