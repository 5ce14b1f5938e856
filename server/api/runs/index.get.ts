import { runQuery } from '../../../shared/api/archive'
import { listRuns } from '../../utils/archive/read'
import { defineRoute } from '../../utils/route'

export default defineRoute({ access: 'club.read', query: runQuery }, ({ actor, query }) => listRuns(actor, query))
