import { listMails } from '../../../utils/accounts/club'
import { pageQuery } from '../../../utils/params'
import { defineRoute } from '../../../utils/route'

export default defineRoute({ access: 'mails.read', query: pageQuery }, ({ actor, query }) => listMails(actor, query.page))
