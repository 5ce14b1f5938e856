import { z } from 'zod'
import { idSchema } from '../../../shared/api/account'
import { previewInvitation } from '../../utils/accounts/people'
import { defineRoute } from '../../utils/route'

export default defineRoute({ access: 'anyone', query: z.object({ token: idSchema }) }, ({ event, query }) => previewInvitation(event, query.token))
