import { readClub } from '../../utils/accounts/club'
import { defineRoute } from '../../utils/route'

export default defineRoute({ access: 'club.read' }, ({ actor }) => readClub(actor))
