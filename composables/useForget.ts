/**
 * What the browser kept of a user goes with the sign-out: stored captures and runs (OPFS, IndexedDB),
 * upload bookmarks and local settings. The theme and shortcut cookies name nobody and stay.
 */
export async function forgetUser(): Promise<void> {
  try {
    localStorage.clear()
    sessionStorage.clear()
  }
  catch { /* Storage may be forbidden; then nothing was kept there. */ }
  try {
    for (const base of await indexedDB.databases?.() ?? []) if (base.name) indexedDB.deleteDatabase(base.name)
  }
  catch { /* Not every browser lists its databases. */ }
  try {
    const root = await navigator.storage.getDirectory() as FileSystemDirectoryHandle & { keys(): AsyncIterable<string> }
    const names: string[] = []
    for await (const name of root.keys()) names.push(name)
    for (const name of names) await root.removeEntry(name, { recursive: true })
  }
  catch { /* No origin-private files here. */ }
}
