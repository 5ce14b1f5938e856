import { setResponseStatus } from 'h3'
import { resetBody } from '../../../shared/api/account'
import { resetPassword } from '../../utils/accounts/people'
import { defineRoute } from '../../utils/route'

export default defineRoute({ access: 'anyone', body: resetBody }, async ({ event, body }) => {
  await resetPassword(event, body)
  setResponseStatus(event, 204)
  return null
})
