import { verdictBody } from '../../../../shared/api/archive'
import { idParam } from '../../../utils/params'
import { giveVerdict } from '../../../utils/review/reviews'
import { defineRoute } from '../../../utils/route'

export default defineRoute({ access: 'club.read', body: verdictBody }, ({ event, actor, body }) => giveVerdict(actor, idParam(event, 'id'), body))
