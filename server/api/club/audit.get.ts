import { listAudit } from '../../utils/accounts/club'
import { pageQuery } from '../../utils/params'
import { defineRoute } from '../../utils/route'

export default defineRoute({ access: 'audit.read', query: pageQuery }, ({ actor, query }) => listAudit(actor, query.page))
