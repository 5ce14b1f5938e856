import { z } from 'zod'
import { pageQuery } from '../../utils/params'
import { listReviews } from '../../utils/review/reviews'
import { defineRoute } from '../../utils/route'

const query = pageQuery.extend({ state: z.enum(['waiting', 'done']).default('waiting') })

export default defineRoute({ access: 'club.read', query }, ({ actor, query: asked }) => listReviews(actor, asked))
