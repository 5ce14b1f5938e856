import { instrumentBody } from '../../../shared/api/archive'
import { changeInstrument } from '../../utils/archive/instruments'
import { idParam } from '../../utils/params'
import { defineRoute } from '../../utils/route'

export default defineRoute({ access: 'club.read', body: instrumentBody }, ({ event, actor, body }) => changeInstrument(actor, idParam(event, 'id'), body))
