/** The keep slider's stops: steps of 0.1 % everywhere in the number field, a logarithmic feel under the hand. */

/** Smallest and largest keep fraction, and the step of the field. */
export const KEEP_MIN = 0.001
export const KEEP_MAX = 1
const STEP = 0.001

/** A fraction rounded to 0.1 % and held within its range. */
export function roundFraction(fraction: number): number {
  return Math.min(KEEP_MAX, Math.max(KEEP_MIN, Math.round(fraction / STEP) / Math.round(1 / STEP)))
}

/** Position 0-1 on the slider of a fraction: equal ratios are equal ways. */
export function positionOf(fraction: number): number {
  return Math.log(fraction / KEEP_MIN) / Math.log(KEEP_MAX / KEEP_MIN)
}

/** Fraction at a position 0-1, rounded to 0.1 %. */
export function fractionAt(position: number): number {
  return roundFraction(KEEP_MIN * (KEEP_MAX / KEEP_MIN) ** Math.min(1, Math.max(0, position)))
}

/** The next fraction by keyboard: 0.1 % below 10 %, 0.5 % below 25 %, then 1 %. */
export function stepFraction(fraction: number, direction: 1 | -1): number {
  const at = direction === 1 ? fraction : fraction - STEP / 2
  const step = at < 0.1 ? 0.001 : at < 0.25 ? 0.005 : 0.01
  return roundFraction(fraction + direction * step)
}

/** A large step by keyboard: a quarter more or less of what is kept. */
export function pageFraction(fraction: number, direction: 1 | -1): number {
  const next = roundFraction(direction === 1 ? fraction * 1.25 : fraction / 1.25)
  return next === fraction ? stepFraction(fraction, direction) : next
}

/** "8 percent, 160 of 2,000 frames", as it is spoken. */
export function keepWords(fraction: number, count: number, ranked: number): string {
  const percent = Math.round(fraction * 1000) / 10
  return `${percent} percent, ${count.toLocaleString('en')} of ${ranked.toLocaleString('en')} frames`
}
