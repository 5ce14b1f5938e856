import { defineEventHandler } from 'h3'
import { notFound } from '../utils/errors'

/** An address of the API that nothing answers: in the API's own words, and not as a page. */
export default defineEventHandler(() => {
  throw notFound()
})
