/** The only way from the screens to the server's API: one place that turns any failure into words for the user. */
import type { FetchError, FetchOptions } from 'ofetch'
import type { ApiError } from '~~/shared/api/account'

/** What went wrong, ready to be shown. `status` 0 means that no answer came. */
export class ApiFailure extends Error {
  override name = 'ApiFailure'
  constructor(message: string, readonly status: number, readonly code: string, readonly field: string | null, readonly retryAfterSeconds: number | null) {
    super(message)
  }
}

const NO_ANSWER = 'Lull’s server did not answer. What you typed is still here: check the connection and try again.'
const UNWELL = 'Something went wrong on the server, and it has been written to its log. Nothing was changed; try again in a moment.'

/** Any thrown thing as an ApiFailure. */
export function asApiFailure(error: unknown): ApiFailure {
  if (error instanceof ApiFailure) return error
  const fetchError = error as FetchError<ApiError> | undefined
  const status = fetchError?.statusCode ?? fetchError?.response?.status ?? 0
  const body = fetchError?.data
  const details = body?.data
  const message = status === 0 ? NO_ANSWER : (body?.message && status < 500) || status === 503 ? body?.message || UNWELL : UNWELL
  return new ApiFailure(message, status, details?.code ?? 'unknown', details?.field ?? null, details?.retryAfterSeconds ?? null)
}

/** To the sign-in page, and back to this one afterwards. */
function signInAgain() {
  useSessionStore().set(null)
  const { fullPath, path } = useRouter().currentRoute.value
  if (path !== '/sign-in') return navigateTo({ path: '/sign-in', query: { next: fullPath } })
}

type Send = (url: string, options?: FetchOptions) => Promise<unknown>

/**
 * `api<T>(url, options)`: the parsed answer, or an ApiFailure thrown. Call it in setup; on the server
 * it carries the visitor's cookie along. The type is the caller's word for it, from shared/api.
 */
export function useApi() {
  const send = useRequestFetch() as unknown as Send
  return async function api<T>(url: string, options: FetchOptions = {}): Promise<T> {
    try {
      return await send(url, options) as T
    }
    catch (error) {
      throw asApiFailure(error)
    }
  }
}

/**
 * Data of a page, fetched on the server for the first view. A 404 becomes the 404 page; other failures
 * stay in `failure` so that the page can show them in place and offer another try.
 */
export async function usePageData<T>(key: () => string, load: (api: ReturnType<typeof useApi>) => Promise<T>) {
  const api = useApi()
  const result = await useAsyncData(key, async () => {
    try {
      return { value: await load(api), failure: null }
    }
    catch (error) {
      const failure = asApiFailure(error)
      return { value: null, failure: { message: failure.message, status: failure.status } }
    }
  }, { deep: true })
  // The session has ended meanwhile: sign in, and come back here.
  watch(result.data, (now) => {
    if (import.meta.client && now?.failure?.status === 401) signInAgain()
  }, { immediate: true })
  if (result.data.value?.failure?.status === 404) {
    throw createError({ statusCode: 404, message: result.data.value.failure.message, fatal: true })
  }
  return {
    data: computed<T | null>({
      get: () => (result.data.value?.value ?? null) as T | null,
      set: (value) => { if (result.data.value) result.data.value = { value, failure: null } as never },
    }),
    failure: computed(() => result.data.value?.failure?.message ?? null),
    busy: computed(() => result.status.value === 'pending'),
    refresh: () => result.refresh(),
  }
}
