import { listInstruments } from '../../utils/archive/instruments'
import { defineRoute } from '../../utils/route'

export default defineRoute({ access: 'club.read' }, ({ actor }) => listInstruments(actor))
