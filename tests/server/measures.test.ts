/** Measures of filed runs as a table, as means over nights, and as CSV. */
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import type { MeasureTable } from '../../shared/api/measures'
import type { RunMeasure } from '../../shared/schemas/measure'
import { announcement, fileSample, must, sampleFiles, sampleResult } from './filing'
import { closeTestDb, makeWorld, type World } from './world'

let world: World
const calibration: NonNullable<RunMeasure['calibration']> = {
  id: null, name: 'Drift', method: 'drift', scaleArcsecPerPx: 0.253977, scaleErr: 0, northAngleDeg: 3.3533, angleErr: 0, parity: 'normal', equinox: 'date',
  capture: 'drift.ser', takenAt: null, declinationDeg: 30, frames: 200, lengthPx: 512,
}
/** 10 px left and 5 px up of the first star: 11.18034 px at 63.43495° on the screen. */
const measureOf = (sepPx: number, sky: boolean): RunMeasure => ({
  measuredAt: '2031-03-05T00:00:00.000Z', calibration: sky ? calibration : null,
  measure: {
    kind: 'measured', frames: 90, fraction: 0.1, blocks: 32, blind: true, fwhmPx: 4, signalToNoise: 900, stability: [], warnings: [],
    components: [{ x: 40, y: 30, flux: 1 }, { x: 30, y: 25, flux: 0.4 }],
    values: [{ sepPx, sepPxErr: 0.01, paDeg: 63.43495, paDegErr: 0.1, dMag: 1, dMagErr: 0.02, quadrant: 'determined' }],
  },
})

async function file(targetName: string, night: string, measure: RunMeasure) {
  const files = sampleFiles()
  return await fileSample(world.people.member.client, announcement({ ...await sampleResult(), measure }, files, { targetName, night }), files)
}
beforeAll(async () => {
  world = await makeWorld()
  await file('Alder pair', '2031-03-04', measureOf(11.18034, true))
  await file('Alder pair', '2031-03-11', measureOf(11.20034, true))
  await file('=Birch', '2031-03-12', measureOf(11.18034, false))
})
afterAll(closeTestDb)
const table = async (query = '') => must(await world.people.otherMember.client.send<MeasureTable>('GET', `/api/measures${query}`), 200).body

describe('the table of measures', () => {
  it('holds what members filed, on the sky where there is a calibration', async () => {
    const { lines, targets } = await table()
    expect(lines.map(line => [line.target.name, line.components, line.sepUnit, line.positionAngle])).toEqual([
      ['=Birch', 'AB', 'px', false], ['Alder pair', 'AB', '″', true], ['Alder pair', 'AB', '″', true]])
    expect(targets).toHaveLength(2)
    // Worked example of a drift: θ = 60.0816°, ρ = 2.83955″.
    expect(lines[1]!.angle).toBeCloseTo(60.0816, 3)
    expect(lines[1]!.sep).toBeCloseTo(2.83955, 4)
    // 2031-03-05T00:00 is JD 2462930.5: J = 2000 + (JD − 2451545.0)/365.25.
    expect(lines[1]!.epoch).toBeCloseTo(2000 + (2_462_930.5 - 2_451_545) / 365.25, 4)
  })
  it('makes a mean of nights, and widens its error by their scatter', async () => {
    const [mean, ...others] = (await table()).means
    expect(others).toEqual([])
    expect(mean).toMatchObject({ nights: 2, components: 'AB' })
    expect(mean!.sep).toBeCloseTo(11.19034 * 0.253977, 5)
    // Two values 0.02 px apart with errors of 0.01 px: chi-squared 2, and half the difference for the mean.
    expect(mean!.scatter.sep).toBeCloseTo(2, 6)
    expect(mean!.sepErr).toBeCloseTo(0.01 * 0.253977, 7)
  })
  it('adds the error of a calibration once, however many nights used it, and folds angles of equal stars', async () => {
    const shared = { ...calibration, name: 'Shared drift', scaleErr: 0.253977 * 0.005, angleErr: 0.3 }
    for (const [night, turned] of [['2031-04-01', 0], ['2031-04-02', 180], ['2031-04-03', 0]] as const) {
      const own = measureOf(11.18034, true)
      own.measure.values[0] = { ...own.measure.values[0]!, paDeg: (63.43495 + turned) % 360, dMag: 0.01, quadrant: 'undetermined' }
      await file('Cedar pair', night, { ...own, calibration: shared })
    }
    const mean = (await table()).means.find(({ target }) => target.name === 'Cedar pair')!
    expect(mean.nights).toBe(3)
    expect(mean.angle).toBeCloseTo(60.0816, 3)
    // 0.1°/√3 of the fits and 0.3° of the calibration; 0.5 % of 2.83955″ and 0.01 px/√3.
    expect(mean.angleErr).toBeCloseTo(Math.hypot(0.1 / Math.sqrt(3), 0.3), 6)
    expect(mean.sepErr).toBeCloseTo(Math.hypot(0.01 * 0.253977 / Math.sqrt(3), 0.005 * 11.18034 * 0.253977), 6)
  })
  it('is that of one pair where asked, and of the own club', async () => {
    const { targets } = await table()
    expect((await table(`?target=${targets.find(({ name }) => name === 'Alder pair')!.id}`)).lines).toHaveLength(2)
    expect(must(await world.people.foreignMember.client.send<MeasureTable>('GET', '/api/measures'), 200).body.lines).toEqual([])
  })
  it('comes as CSV with units in its head and guarded cells', async () => {
    const [header, first, second] = must(await world.people.member.client.send('GET', '/api/measures/export'), 200).text.split('\r\n')
    expect(header).toContain('position angle (deg),position angle error (deg),separation (arcsec),separation error (arcsec)')
    expect(first).toMatch(/^"'=Birch",AB,2031\.\d{4},,,,,11\.1803,0\.01,63\.435,1,0\.02,determined,1,90,,Cl,,,Wilma,none,/)
    expect(second).toMatch(/^Alder pair,AB,2031\.\d{4},60\.082,0\.1,2\.839[56],0\.0025,,,,1,0\.02,determined,1,90,,Cl,date,Drift,Wilma,none,/)
  })
})
