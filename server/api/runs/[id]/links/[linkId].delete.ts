import { setResponseStatus } from 'h3'
import { idParam } from '../../../../utils/params'
import { withdrawLink } from '../../../../utils/review/links'
import { defineRoute } from '../../../../utils/route'

export default defineRoute({ access: 'club.read' }, async ({ event, actor }) => {
  await withdrawLink(actor, idParam(event, 'id'), idParam(event, 'linkId'))
  setResponseStatus(event, 204)
  return null
})
