import { clubBody } from '../../../shared/api/account'
import { changeClub } from '../../utils/accounts/club'
import { defineRoute } from '../../utils/route'

export default defineRoute({ access: 'club.write', body: clubBody }, ({ actor, body }) => changeClub(actor, body))
