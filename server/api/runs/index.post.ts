import { setResponseStatus } from 'h3'
import { announceBody } from '../../../shared/api/archive'
import { announce } from '../../utils/archive/announce'
import { runDetail } from '../../utils/archive/read'
import { defineRoute } from '../../utils/route'

export default defineRoute({ access: 'club.read', body: announceBody }, async ({ event, actor, body }) => {
  const id = await announce(actor, body)
  setResponseStatus(event, 201)
  return runDetail(actor, id)
})
