import { setResponseStatus } from 'h3'
import { forgotBody } from '../../../shared/api/account'
import { forgotPassword } from '../../utils/accounts/people'
import { defineRoute } from '../../utils/route'

/** The answer never tells whether there is such an account. */
export default defineRoute({ access: 'anyone', body: forgotBody }, async ({ event, body }) => {
  await forgotPassword(event, body)
  setResponseStatus(event, 202)
  return { accepted: true }
})
