/** The look, kept in a cookie so that the server renders it and no page flashes in another theme. */
export const themes = ['dark', 'light', 'red'] as const
export type Theme = typeof themes[number]
export const themeLabels: Record<Theme, string> = { dark: 'Dark', light: 'Light', red: 'Red only' }

const YEAR_SECONDS = 60 * 60 * 24 * 365

export function useTheme() {
  const cookie = useCookie<string | null>('lull-theme', { default: () => null, maxAge: YEAR_SECONDS, sameSite: 'lax', path: '/' })
  const theme = computed<Theme>(() => (themes as readonly string[]).includes(cookie.value ?? '') ? cookie.value as Theme : 'dark')
  return { theme, setTheme: (next: Theme) => { cookie.value = next } }
}
