/** Numbers, sizes and dates as Lull writes them. Pure, the same on the server and in the browser. */
const LOCALE = 'en-GB'
const count = new Intl.NumberFormat(LOCALE)
const nightThisYear = new Intl.DateTimeFormat(LOCALE, { day: 'numeric', month: 'long', timeZone: 'UTC' })
const nightAnyYear = new Intl.DateTimeFormat(LOCALE, { day: 'numeric', month: 'long', year: 'numeric', timeZone: 'UTC' })

/** 12345 → "12,345". */
export const formatCount = (value: number) => count.format(value)

/** "1 run", "3 runs"; the plural is the word with an s unless given. */
export const formatPlural = (value: number, word: string, plural = `${word}s`) => `${formatCount(value)} ${value === 1 ? word : plural}`

/** Bytes in decimal units with three figures: 1234567 → "1.23 MB". */
export function formatBytes(bytes: number): string {
  if (bytes < 1000) return `${bytes} B`
  const units = ['kB', 'MB', 'GB', 'TB']
  let value = bytes / 1000
  let unit = 0
  while (value >= 999.5 && unit < units.length - 1) {
    value /= 1000
    unit++
  }
  return `${value < 9.995 ? value.toFixed(2) : value < 99.95 ? value.toFixed(1) : value.toFixed(0)} ${units[unit]}`
}

/** A night ("2026-11-21") as "21 November", with the year where `thisYear` is another one. */
export function formatNight(night: string, thisYear?: number): string {
  const date = new Date(`${night}T00:00:00Z`)
  if (Number.isNaN(date.getTime())) return night
  return (date.getUTCFullYear() === thisYear ? nightThisYear : nightAnyYear).format(date)
}

const pad = (value: number) => String(value).padStart(2, '0')
const months = ['Jan', 'Feb', 'Mar', 'Apr', 'May', 'Jun', 'Jul', 'Aug', 'Sep', 'Oct', 'Nov', 'Dec']

/** An instant in UTC: "21 Nov 2026, 22:41 UTC". */
export function formatUtc(iso: string): string {
  const date = new Date(iso)
  if (Number.isNaN(date.getTime())) return iso
  return `${date.getUTCDate()} ${months[date.getUTCMonth()]} ${date.getUTCFullYear()}, ${pad(date.getUTCHours())}:${pad(date.getUTCMinutes())} UTC`
}

/** An instant on the clock of this machine with its offset: "21 Nov 2026, 23:41 +01:00". Browser only. */
export function formatLocal(iso: string): string {
  const date = new Date(iso)
  if (Number.isNaN(date.getTime())) return iso
  const offset = -date.getTimezoneOffset()
  const sign = offset < 0 ? '−' : '+'
  const size = Math.abs(offset)
  const zone = offset === 0 ? 'UTC' : `${sign}${pad(Math.floor(size / 60))}:${pad(size % 60)}`
  return `${date.getDate()} ${months[date.getMonth()]} ${date.getFullYear()}, ${pad(date.getHours())}:${pad(date.getMinutes())} ${zone}`
}

/** Seconds to wait, in words: 42 → "42 seconds"; 130 → "3 minutes". */
export function formatWait(seconds: number): string {
  return seconds < 100 ? formatPlural(Math.max(1, Math.ceil(seconds)), 'second') : formatPlural(Math.ceil(seconds / 60), 'minute')
}

/** A number and its unit on one line: "2.0 ×" with a space that does not break. */
export const keepTogether = (text: string) => text.replace(/(\d) /g, '$1\u00a0')
