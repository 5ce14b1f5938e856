import { defineRoute } from '../../utils/route'
import { meOf } from '../../utils/session'

export default defineRoute({ access: 'signed-in' }, ({ actor }) => meOf(actor))
