import { listCalibrations } from '../../utils/archive/calibrations'
import { defineRoute } from '../../utils/route'

export default defineRoute({ access: 'club.read' }, ({ actor }) => listCalibrations(actor))
