/** The night of a capture: the evening date at the observing place, from local noon to local noon. */

/** YYYY-MM-DD of the night that holds a time. `offsetMinutes` is local minus UTC at the observing place. */
export function nightOf(unixMs: number, offsetMinutes: number): string {
  return new Date(unixMs + (offsetMinutes - 12 * 60) * 60_000).toISOString().slice(0, 10)
}
