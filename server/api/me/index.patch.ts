import { profileBody } from '../../../shared/api/account'
import { changeProfile } from '../../utils/accounts/people'
import { defineRoute } from '../../utils/route'

export default defineRoute({ access: 'signed-in', body: profileBody }, ({ event, actor, body }) => changeProfile(event, actor, body))
