/** Asks again at intervals while the page is looked at, and at once when it comes back into sight. */
export function usePolling(task: () => unknown, everyMs: number) {
  let timer: ReturnType<typeof setInterval> | undefined
  const run = () => { if (document.visibilityState === 'visible') task() }
  onMounted(() => {
    timer = setInterval(run, everyMs)
    document.addEventListener('visibilitychange', run)
  })
  onBeforeUnmount(() => {
    clearInterval(timer)
    document.removeEventListener('visibilitychange', run)
  })
}
