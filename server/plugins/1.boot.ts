/** At boot: settings checked, tables brought up to date, the demo's people made, mail delivered; at the end: all closed. */
import { prepareFirstClub } from '../utils/accounts/demo'
import { closeDb, useDb } from '../utils/db'
import { startLocalSmtp } from '../utils/local-smtp'
import { deliverMails } from '../utils/mail'
import { migrate } from '../utils/migrate'

export default defineNitroPlugin((nitro) => {
  const config = useRuntimeConfig()
  if (!config.session?.password || config.session.password.length < 32) {
    console.error('NUXT_SESSION_PASSWORD must hold at least 32 characters; nobody could sign in. The start command makes and keeps one.')
    process.exit(1)
  }
  let timer: NodeJS.Timeout | undefined
  let closeSmtp: (() => Promise<void>) | undefined
  const ready = (async () => {
    await migrate(useDb())
    await prepareFirstClub(useDb())
    closeSmtp = await startLocalSmtp()
    timer = setInterval(() => void deliverMails(), 30_000)
    await deliverMails()
  })()
  ready.catch((error) => {
    console.error('Lull could not get ready:', error.message)
    process.exit(1)
  })
  nitro.hooks.hook('close', async () => {
    clearInterval(timer)
    await ready.catch(() => {})
    await closeSmtp?.()
    await closeDb()
  })
})
