/** Whole seconds until an instant (milliseconds since 1970), counting down; 0 when it is past or null. */
export function useCountdown(until: Ref<number | null>) {
  const left = ref(0)
  let timer: ReturnType<typeof setInterval> | undefined
  const tick = () => {
    left.value = until.value === null ? 0 : Math.max(0, Math.ceil((until.value - Date.now()) / 1000))
    if (left.value === 0) clearInterval(timer)
  }
  watch(until, () => {
    clearInterval(timer)
    tick()
    if (left.value > 0) timer = setInterval(tick, 1000)
  })
  onBeforeUnmount(() => clearInterval(timer))
  return { left }
}
