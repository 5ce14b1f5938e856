import { defineEventHandler, setResponseHeader, setResponseStatus } from 'h3'
import { healthOf } from '../utils/health'

/** 200 while database and store answer, 503 otherwise. Asks for no session, which would need the database itself. */
export default defineEventHandler(async (event) => {
  const health = await healthOf()
  setResponseHeader(event, 'Cache-Control', 'no-store')
  setResponseStatus(event, health.ok ? 200 : 503)
  return health
})
