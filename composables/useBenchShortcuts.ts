/** One list of commands feeds the keys and the help sheet. Single keys can be switched off on the account page. */
export interface BenchCommand { keys: string, label: string, single: boolean, run: () => void }

/** "Ctrl+Shift+Z" for an event; letters in upper case. */
function chord(event: KeyboardEvent): string {
  const key = event.key.length === 1 ? event.key.toUpperCase() : event.key
  return [(event.ctrlKey || event.metaKey) && 'Ctrl', event.altKey && 'Alt', event.shiftKey && event.key.length > 1 && 'Shift', event.shiftKey && (event.ctrlKey || event.metaKey) && event.key.length === 1 && 'Shift', key].filter(Boolean).join('+')
}

export function useBenchShortcuts(commands: () => BenchCommand[]) {
  const { singleKeyShortcuts } = useShortcutPreference()
  function handle(event: KeyboardEvent) {
    const target = event.target as HTMLElement
    const typing = target.closest('input:not([type=range]):not([type=checkbox]), textarea, select, [contenteditable], dialog, [popover]')
    const command = commands().find(({ keys }) => keys.split(' or ').includes(chord(event)))
    if (!command || (typing && command.single) || (command.single && !singleKeyShortcuts.value)) return
    if (typing && command.keys.startsWith('Ctrl')) return
    // A dialog has the keyboard, Escape included, even where its focused button was disabled meanwhile.
    if (document.querySelector('dialog:modal')) return
    event.preventDefault()
    command.run()
  }
  onMounted(() => window.addEventListener('keydown', handle))
  onBeforeUnmount(() => window.removeEventListener('keydown', handle))
}
