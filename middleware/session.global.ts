/** Pages need somebody signed in, except those that are for people who are not, and the links for guests. */
const open = /^\/(?:sign-in|register|forgot|reset)?\/?$|^\/s\/[^/]+\/?$/

export default defineNuxtRouteMiddleware((to) => {
  const session = useSessionStore()
  if (open.test(to.path) || session.me || to.matched.length === 0) return
  // While the server is unwell nobody is sent away: the page itself says what is wrong.
  if (!session.known) return
  return navigateTo({ path: '/sign-in', query: to.fullPath === '/' ? {} : { next: to.fullPath } })
})
