/** One submission of a form at a time; its failure in words, and the field it belongs to. */
export function useSubmit() {
  const busy = ref(false)
  const message = ref<string | null>(null)
  const field = ref<string | null>(null)
  const code = ref<string | null>(null)
  const retryAt = ref<number | null>(null)

  function clear() {
    message.value = null
    field.value = null
    code.value = null
    retryAt.value = null
  }

  /** Runs the task unless one is running; true if it went well. */
  async function submit(task: () => Promise<unknown>): Promise<boolean> {
    if (busy.value) return false
    busy.value = true
    clear()
    try {
      await task()
      return true
    }
    catch (error) {
      const failure = asApiFailure(error)
      message.value = failure.message
      field.value = failure.field
      code.value = failure.code
      retryAt.value = failure.retryAfterSeconds === null ? null : Date.now() + failure.retryAfterSeconds * 1000
      return false
    }
    finally {
      busy.value = false
    }
  }

  /** Text for one field, if the failure is about it; the field stands under its label, so its name is not said again. */
  const errorOf = (name: string) => (field.value === name ? (message.value ?? '').replace(new RegExp(`^${name}:\\s*`), '') : '')
  /** Text for the form as a whole. */
  const general = computed(() => (field.value === null ? message.value : null))
  return { busy, message, field, code, retryAt, general, errorOf, submit, clear }
}
