import { registerBody } from '../../../shared/api/account'
import { register } from '../../utils/accounts/people'
import { defineRoute } from '../../utils/route'

export default defineRoute({ access: 'anyone', body: registerBody }, ({ event, body }) => register(event, body))
