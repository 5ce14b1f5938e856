/** Reference stars that were kept in this browser: what blurred them, to undo the same blur on other captures of the same night. */
export interface ReferenceStar {
  name: string
  /** Transfer over the telescope's own at 0, step, 2 step … cycles per px of its capture. */
  step: number
  values: number[]
  /** Arcseconds per pixel of its capture; null where not known. */
  scale: number | null
}

const KEY = 'lull-reference-stars'
const MOST = 8

export function referenceStars(): ReferenceStar[] {
  try {
    const list = JSON.parse(localStorage.getItem(KEY) ?? '[]') as ReferenceStar[]
    return Array.isArray(list) ? list.filter(star => typeof star.name === 'string' && star.step > 0 && Array.isArray(star.values) && star.values.length > 1) : []
  }
  catch {
    return []
  }
}

/** Keeps a star under its name, the newest first. Returns false where the browser keeps nothing. */
export function keepReferenceStar(star: ReferenceStar): boolean {
  try {
    localStorage.setItem(KEY, JSON.stringify([star, ...referenceStars().filter(each => each.name !== star.name)].slice(0, MOST)))
    return true
  }
  catch {
    return false
  }
}

export function forgetReferenceStar(name: string): void {
  try {
    localStorage.setItem(KEY, JSON.stringify(referenceStars().filter(each => each.name !== name)))
  }
  catch { /* Nothing is kept there. */ }
}

/** The transfer on the pixels of a capture of another scale; as it is where one of the scales is not known. */
export function onScale(star: ReferenceStar, scale: number | null): { name: string, step: number, values: number[] } {
  const factor = star.scale && scale ? scale / star.scale : 1
  return { name: star.name.slice(0, 120), step: Math.min(0.5, star.step * factor), values: star.values.map(value => Math.min(1, Math.max(0, value))) }
}
