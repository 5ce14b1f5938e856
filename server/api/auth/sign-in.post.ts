import { signInBody } from '../../../shared/api/account'
import { signIn } from '../../utils/accounts/people'
import { defineRoute } from '../../utils/route'

export default defineRoute({ access: 'anyone', body: signInBody }, ({ event, body }) => signIn(event, body))
