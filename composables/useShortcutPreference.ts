/** Shortcuts of a single key can be switched off (WCAG 2.2, 2.1.4). They are on until a user says otherwise. */
export function useShortcutPreference() {
  const cookie = useCookie<string | null>('lull-shortcuts', { default: () => null, maxAge: 60 * 60 * 24 * 365, sameSite: 'lax', path: '/' })
  const enabled = computed({
    get: () => cookie.value !== 'off',
    set: (on: boolean) => { cookie.value = on ? null : 'off' },
  })
  return { singleKeyShortcuts: enabled }
}
