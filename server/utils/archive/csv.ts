/** The list of runs as CSV (RFC 4180), with cells that no spreadsheet takes for a formula. */
import type { RunSummary } from '../../../shared/api/archive'

/** Text cells that begin with = + - @ tab or CR get an apostrophe (OWASP, CSV injection); numbers stay numbers. */
export function cell(value: string | number | null): string {
  if (value === null) return ''
  if (typeof value === 'number') return String(value)
  const guarded = /^[=+\-@\t\r]/.test(value) ? `'${value}` : value
  return /[",\r\n]/.test(guarded) || guarded !== value ? `"${guarded.replaceAll('"', '""')}"` : guarded
}

export function runsCsv(runs: RunSummary[]): string {
  const header = 'night,target,kind,by,instrument,recipe,recipe version,kept (%),kept (frames),frames,FWHM (px),FWHM error (px),scale (arcsec/px),review,filed (UTC),run'
  const rows = runs.map(run => [
    run.night, run.target.name, run.target.kind, run.owner.name, run.instrument?.name ?? null, run.recipe?.name ?? null, run.recipe?.version ?? null,
    Math.round(run.keep.fraction * 1000) / 10, run.keep.count, run.frames, run.fwhmPx, run.fwhmErrPx, run.scaleArcsecPerPx, run.review, run.filedAt, run.id,
  ].map(cell).join(','))
  return [header, ...rows, ''].join('\r\n')
}
