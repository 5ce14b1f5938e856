/** Nights before the day on which the demo began. */

/** Date of a night, YYYY-MM-DD, `nightsAgo` before the day of `anchor` (ISO 8601). */
export function nightOf(anchor: string, nightsAgo: number): string {
  const day = new Date(anchor)
  day.setUTCDate(day.getUTCDate() - nightsAgo)
  return day.toISOString().slice(0, 10)
}
