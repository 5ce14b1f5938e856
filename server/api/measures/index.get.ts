import { measureQuery } from '../../../shared/api/measures'
import { measureTable } from '../../utils/archive/measures'
import { defineRoute } from '../../utils/route'

export default defineRoute({ access: 'club.read', query: measureQuery }, ({ actor, query }) => measureTable(actor, query))
