/** Who is signed in. Filled once by plugins/session.ts, on the server for the first view. */
import { defineStore } from 'pinia'
import type { Me } from '~~/shared/api/account'

export const useSessionStore = defineStore('session', () => {
  const me = ref<Me | null>(null)
  /** False while the server could not say (it was unwell), so that nobody is sent to sign in for nothing. */
  const known = ref(false)

  const isOrganiser = computed(() => me.value?.role === 'organiser')
  const mayJudge = computed(() => me.value?.role === 'mentor' || me.value?.role === 'organiser')

  function set(next: Me | null) {
    me.value = next
    known.value = true
  }
  return { me, known, isOrganiser, mayJudge, set }
})
