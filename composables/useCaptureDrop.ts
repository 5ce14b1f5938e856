/** Dropping files and folders anywhere on the page. Folders are walked to their end; `readEntries` gives only some at a time. */
async function filesOf(entry: FileSystemEntry): Promise<File[]> {
  if (entry.isFile) return [await new Promise<File>((resolve, reject) => (entry as FileSystemFileEntry).file(resolve, reject))]
  const reader = (entry as FileSystemDirectoryEntry).createReader()
  const files: File[] = []
  for (;;) {
    const entries = await new Promise<FileSystemEntry[]>((resolve, reject) => reader.readEntries(resolve, reject))
    if (entries.length === 0) return files
    for (const child of entries) if (child.isFile) files.push(...await filesOf(child))
  }
}

export function useCaptureDrop(onFiles: (name: string, files: File[]) => void) {
  const over = ref(false)
  let depth = 0
  const carriesFiles = (event: DragEvent) => event.dataTransfer?.types.includes('Files') ?? false
  const enter = (event: DragEvent) => {
    if (!carriesFiles(event)) return
    event.preventDefault()
    depth++
    over.value = true
  }
  const leave = () => {
    depth = Math.max(0, depth - 1)
    if (depth === 0) over.value = false
  }
  const dragOver = (event: DragEvent) => { if (carriesFiles(event)) event.preventDefault() }
  const drop = async (event: DragEvent) => {
    if (!carriesFiles(event)) return
    event.preventDefault()
    depth = 0
    over.value = false
    // Entries must be taken before the first await: the browser empties the list afterwards.
    const entries = [...event.dataTransfer!.items].map(item => item.webkitGetAsEntry()).filter(entry => entry !== null)
    const plain = [...event.dataTransfer!.files]
    const files = entries.length ? (await Promise.all(entries.map(filesOf))).flat() : plain
    const name = entries.length === 1 ? entries[0]!.name : files[0]?.name ?? 'capture'
    if (files.length) onFiles(name, files)
  }
  onMounted(() => {
    window.addEventListener('dragenter', enter)
    window.addEventListener('dragleave', leave)
    window.addEventListener('dragover', dragOver)
    window.addEventListener('drop', drop)
  })
  onBeforeUnmount(() => {
    window.removeEventListener('dragenter', enter)
    window.removeEventListener('dragleave', leave)
    window.removeEventListener('dragover', dragOver)
    window.removeEventListener('drop', drop)
  })
  return { over }
}
