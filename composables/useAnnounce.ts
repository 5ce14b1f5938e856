/** One announcer: what happened, shown for a moment at the foot of the window and spoken by screen readers. */
export interface Announcement { id: number, text: string, tone: 'plain' | 'trouble', action: { label: string, run: () => void } | null }

let next = 1

export function useAnnounce() {
  const list = useState<Announcement[]>('announcements', () => [])
  const dismiss = (id: number) => { list.value = list.value.filter(item => item.id !== id) }
  /** Shows a sentence; an action (such as Undo) keeps it longer. Trouble stays until dismissed. */
  function announce(text: string, options: { tone?: Announcement['tone'], action?: Announcement['action'] } = {}) {
    const item: Announcement = { id: next++, text, tone: options.tone ?? 'plain', action: options.action ?? null }
    list.value = [...list.value.slice(-2), item]
    if (item.tone === 'plain' && import.meta.client) setTimeout(() => dismiss(item.id), item.action ? 12_000 : 6_000)
  }
  return { announcements: list, announce, dismiss }
}
