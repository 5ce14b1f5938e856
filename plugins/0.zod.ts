/**
 * Zod tries whether it may compile its checks with `new Function`. The content security policy forbids that, and the
 * browser reports the attempt; so it is told not to try.
 */
import { config } from 'zod'

config({ jitless: true })

export default defineNuxtPlugin(() => {})
