/** What the club measured: filed measures as lines, and means over nights. */
import type { z } from 'zod'
import type { MeasureLine, MeasureMean, measureQuery, MeasureTable } from '../../../shared/api/measures'
import { angleDifference, reduce360 } from '../../../shared/astro/angles'
import { weightedMean } from '../../../shared/astro/combine'
import { julianDate, julianYear } from '../../../shared/astro/epoch'
import { toldValues } from '../../../shared/astro/measured'
import type { RunMeasure } from '../../../shared/schemas/measure'
import type { ReviewState } from '../../../shared/schemas/run'
import { useDb } from '../db'
import type { Actor } from '../session'
import { cell } from './csv'

const MAX_LINES = 5000

interface Row { id: string, night: Date | string, measure: string, start: string | null, end: string | null, aperture: number | null, owner: string, target_id: string, target: string, review_state: ReviewState }

/** A line with its errors apart: those of the fit are its own, those of the calibration it shares with all that used it. */
interface FullLine { line: MeasureLine, fit: { sep: number, angle: number }, shared: { key: string, sep: number, angle: number } }

export async function measureTable(actor: Actor, query: z.output<typeof measureQuery>): Promise<MeasureTable> {
  const db = useDb()
  const found = db('runs as r').join('users as u', 'u.id', 'r.owner_id').join('targets as t', 't.id', 'r.target_id')
    .where({ 'r.club_id': actor.clubId, 'r.state': 'filed' }).whereNotNull('r.measure')
    // A run that was replaced speaks no more for its target.
    .whereNotExists(db('runs as n').whereRaw('n.replaces_run_id = r.id').where('n.state', 'filed').select(db.raw('1')))
  const targets = await found.clone().distinct('t.id as id', 't.name as name').orderBy('t.name') as { id: string, name: string }[]
  if (query.target) found.where('r.target_id', query.target)
  if (query.from) found.where('r.night', '>=', query.from)
  if (query.to) found.where('r.night', '<=', query.to)
  const rows = await found.orderBy([{ column: 't.name' }, { column: 'r.night' }, { column: 'r.id' }]).limit(MAX_LINES).select(
    'r.id', 'r.night', 'r.measure', 'r.review_state', 'u.name as owner', 't.id as target_id', 't.name as target',
    db.raw('json_unquote(json_extract(r.result, \'$.facts.times.start\')) as start'), db.raw('json_unquote(json_extract(r.result, \'$.facts.times.end\')) as end'),
    db.raw('json_extract(r.result, \'$.facts.apertureMm\') as aperture')) as Row[]
  const full = rows.flatMap(linesOf)
  return { lines: full.map(({ line }) => line), means: meansOf(full), targets }
}

function linesOf(row: Row): FullLine[] {
  const { measure, calibration } = JSON.parse(row.measure) as RunMeasure
  const night = typeof row.night === 'string' ? row.night.slice(0, 10) : row.night.toISOString().slice(0, 10)
  const [start, end] = [Date.parse(row.start ?? ''), Date.parse(row.end ?? '')]
  const middle = Number.isFinite(start) ? (Number.isFinite(end) ? (start + end) / 2 : start) : Date.parse(`${night}T24:00:00Z`)
  const aperture = Number(row.aperture)
  return measure.values.map((values, j) => {
    const told = toldValues(values, calibration)
    const exact = toldValues(values, calibration && { ...calibration, scaleErr: 0, angleErr: 0 })
    const line: MeasureLine = {
      run: { id: row.id, night, owner: row.owner, review: row.review_state }, target: { id: row.target_id, name: row.target }, components: `A${'BCD'[j]}`, epoch: julianYear(julianDate(middle)),
      ...told, quadrant: values.quadrant, frames: measure.frames, apertureMm: Number.isFinite(aperture) && aperture > 0 ? aperture : null,
      calibration: calibration?.name ?? null, equinox: told.positionAngle ? calibration?.equinox ?? null : null,
    }
    return {
      line, fit: { sep: exact.sepErr, angle: exact.angleErr },
      shared: calibration
        ? { key: calibration.id ?? calibration.name, sep: values.sepPx * calibration.scaleErr, angle: calibration.angleErr ?? 0 }
        : { key: '', sep: 0, angle: 0 },
    }
  })
}

/** Nothing is known better than this; an error of 0 would outweigh everything. */
const LEAST = 1e-9

/**
 * Means of what was measured on the sky in several nights. Weighted by the errors of the fits, which are each run's own; the
 * error of a calibration is the same in all runs that used it, and is added once, with their share of the weight.
 */
function meansOf(lines: FullLine[]): MeasureMean[] {
  const groups = new Map<string, FullLine[]>()
  for (const full of lines) {
    const { line } = full
    if (line.sepUnit !== '″' || !line.positionAngle) continue
    // Angles for different equators are not averaged.
    const key = `${line.target.id} ${line.components} ${line.equinox}`
    groups.set(key, [...groups.get(key) ?? [], full])
  }
  return [...groups.values()].flatMap((group) => {
    const first = group[0]!.line
    const nights = new Set(group.map(({ line }) => line.run.night)).size
    if (nights < 2) return []
    // Where it is not known which star is the brighter, an angle stands for its opposite as well.
    const folded = group.some(({ line }) => line.quadrant === 'undetermined')
    const away = (angle: number) => {
      const difference = angleDifference(angle, first.angle)
      return folded && Math.abs(difference) > 90 ? difference - 180 * Math.sign(difference) : difference
    }
    const sep = meanWith(group, 'sep', ({ line }) => line.sep)
    const angle = meanWith(group, 'angle', ({ line }) => away(line.angle))
    const dMag = weightedMean(group.map(({ line }) => ({ value: line.dMag, err: Math.max(LEAST, line.dMagErr) })))
    const freedom = group.length - 1
    return [{
      target: first.target, components: first.components, nights, epoch: group.reduce((sum, { line }) => sum + line.epoch, 0) / group.length,
      sep: sep.value, sepErr: sep.err, angle: reduce360(first.angle + angle.value), angleErr: angle.err, dMag: dMag.value, dMagErr: dMag.err,
      scatter: { sep: sep.chiSquared / freedom, angle: angle.chiSquared / freedom },
    }]
  })
}

function meanWith(group: readonly FullLine[], what: 'sep' | 'angle', value: (full: FullLine) => number) {
  const mean = weightedMean(group.map(full => ({ value: value(full), err: Math.max(LEAST, full.fit[what]) })))
  const weights = group.map(full => Math.max(LEAST, full.fit[what]) ** -2)
  const total = weights.reduce((sum, weight) => sum + weight, 0)
  const byCalibration = new Map<string, number>()
  group.forEach((full, i) => byCalibration.set(full.shared.key, (byCalibration.get(full.shared.key) ?? 0) + weights[i]! / total * full.shared[what]))
  return { ...mean, err: Math.hypot(mean.err, ...byCalibration.values()) }
}

/** Method code of selected short exposures with an electronic detector in the catalogues of double stars. */
const METHOD = 'Cl'

export function measuresCsv({ lines }: MeasureTable): string {
  const header = 'target,components,epoch (Julian year),position angle (deg),position angle error (deg),separation (arcsec),separation error (arcsec),separation (px),separation error (px),angle on the screen (deg),magnitude difference,magnitude difference error,quadrant,nights,frames,aperture (mm),method,equinox,calibration,by,review,run'
  const fixed = (value: number | null, digits: number) => (value === null ? null : Number(value.toFixed(digits)))
  const rows = lines.map((line) => {
    const sky = line.sepUnit === '″'
    return [
      line.target.name, line.components, line.epoch.toFixed(4), line.positionAngle ? fixed(line.angle, 3) : null, line.positionAngle ? fixed(line.angleErr, 3) : null,
      sky ? fixed(line.sep, 4) : null, sky ? fixed(line.sepErr, 4) : null, sky ? null : fixed(line.sep, 4), sky ? null : fixed(line.sepErr, 4), line.positionAngle ? null : fixed(line.angle, 3),
      fixed(line.dMag, 3), fixed(line.dMagErr, 3), line.quadrant, 1, line.frames, line.apertureMm, METHOD, line.equinox, line.calibration, line.run.owner, line.run.review, line.run.id,
    ].map(cell).join(',')
  })
  return [header, ...rows, ''].join('\r\n')
}
