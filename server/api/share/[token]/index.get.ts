import { guestDetail } from '../../../utils/archive/read'
import { requireLink } from '../../../utils/review/links'
import { defineRoute } from '../../../utils/route'

export default defineRoute({ access: 'anyone' }, async ({ event }) => {
  const link = await requireLink(event)
  return guestDetail(link.runId, link.token, { scope: link.scope, expiresAt: link.expiresAt })
})
