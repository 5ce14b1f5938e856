import { runPatchBody } from '../../../../shared/api/archive'
import { changeRun } from '../../../utils/archive/change'
import { idParam } from '../../../utils/params'
import { defineRoute } from '../../../utils/route'

export default defineRoute({ access: 'club.read', body: runPatchBody }, ({ event, actor, body }) => changeRun(actor, idParam(event, 'id'), body))
