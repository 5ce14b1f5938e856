/** Media types of files by role and name; never guessed from content, always answered with nosniff. */
import type { FileRole } from '../../../shared/schemas/run'

const byRole: Record<Exclude<FileRole, 'raw'>, string> = {
  stack: 'image/fits', average: 'image/fits', ladder: 'image/fits', preview: 'image/png', thumbnail: 'image/png', proofs: 'image/png',
  frames: 'text/csv; charset=utf-8', recipe: 'application/json', facts: 'application/json',
}

export function typeOf(role: FileRole): string {
  return role === 'raw' ? 'application/octet-stream' : byRole[role]
}

/** A file name that is safe in a header and on a disk: no paths, no control characters, no text-direction marks, no half surrogates. */
export function cleanName(name: string): string {
  const base = name.split(/[/\\]/).at(-1)!
  // eslint-disable-next-line no-control-regex -- control characters are what must go
  const clean = base.normalize('NFC').replaceAll(/[\u0000-\u001f\u007f-\u009f\u061c\u200e\u200f\u2028-\u202e\u2066-\u2069\p{Cs}]/gu, '').replaceAll(/[<>:"|?*]/g, '_').trim().replace(/^\.+/, '')
  return [...clean].slice(0, 200).join('') || 'file'
}

/** Content-Disposition as RFC 6266 has it: an ASCII name for old clients and the exact one in UTF-8. */
export function attachment(name: string): string {
  const clean = cleanName(name)
  const ascii = clean.normalize('NFKD').replaceAll(/[^\x20-\x7e]/g, '_').replaceAll(/["\\%]/g, '_')
  const encoded = encodeURIComponent(clean).replaceAll(/['()*]/g, char => `%${char.charCodeAt(0).toString(16).toUpperCase()}`)
  return `attachment; filename="${ascii}"; filename*=UTF-8''${encoded}`
}
