import type { Me } from '~~/shared/api/account'

/** Asks who is signed in before the first page is made; afterwards the store knows. */
export default defineNuxtPlugin({
  name: 'session',
  dependsOn: ['pinia'],
  async setup() {
    const session = useSessionStore()
    // An address of the API that no route answers is rendered as a page: it must not ask the API in turn.
    if (session.known || useRequestURL().pathname.startsWith('/api/')) return
    const api = useApi()
    try {
      session.set(await api<Me>('/api/me'))
    }
    catch (error) {
      if (asApiFailure(error).status === 401) session.set(null)
    }
  },
})
