import { describe, expect, it } from 'vitest'
import { angleDifference, cdMatrix, driftRate, orientationOfCd, pixelOffset, polarOf, precessionOfAngle, skyOffset } from '../../../shared/astro/angles'
import { besselianYear, julianDate, julianYear } from '../../../shared/astro/epoch'
import type { OrbitElements } from '../../../shared/astro/orbit'
import { eccentricAnomaly, elementsFromDays, ephemeris, ephemerisOfDate, thieleInnes } from '../../../shared/astro/orbit'

const elements = (P: number, T: number, e: number, a: number, i: number, node: number, w: number): OrbitElements =>
  ({ periodYears: P, periastronYear: T, eccentricity: e, semiMajorAxisArcsec: a, inclinationDeg: i, nodeDeg: node, argumentDeg: w })

describe('a textbook orbit', () => {
  // J. Meeus, Astronomical Algorithms, 2nd ed., example 57.a, p. 398.
  const textbook = elements(41.623, 1934.008, 0.2763, 0.907, 59.025, 23.717, 219.907)
  it('gives the printed position angle and separation', () => {
    const { paDeg, sep } = ephemeris(textbook, 1980)
    expect(paDeg).toBeCloseTo(318.4, 1)
    expect(sep).toBeCloseTo(0.411, 3)
    expect(eccentricAnomaly(37.788 * Math.PI / 180, 0.2763) * 180 / Math.PI).toBeCloseTo(49.896, 2)
  })
  it('has Thiele–Innes constants that describe the same ellipse', () => {
    const { A, B, F, G } = thieleInnes(textbook)
    // Invariants of the projection (Binnendijk 1960, from memory): A²+B²+F²+G² = a²(1 + cos²i), AG − BF = a² cos i.
    const ci = Math.cos(59.025 * Math.PI / 180)
    expect(A * A + B * B + F * F + G * G).toBeCloseTo(0.907 ** 2 * (1 + ci * ci), 12)
    expect(A * G - B * F).toBeCloseTo(0.907 ** 2 * ci, 12)
  })
})

describe('Kepler’s equation', () => {
  it('holds for every eccentricity and anomaly', () => {
    for (const e of [0, 0.1, 0.5, 0.9, 0.99, 0.9999]) {
      for (let m = -20; m <= 20; m += 0.37) {
        const anomaly = eccentricAnomaly(m, e)
        expect(Math.abs(anomaly - e * Math.sin(anomaly) - m)).toBeLessThan(1e-11)
      }
    }
    expect(() => eccentricAnomaly(1, 1)).toThrow(RangeError)
  })
})

/**
 * Published elements and ephemerides for the equator of date: Matson, Williams, Hartkopf & Mason, Sixth
 * Catalog of Orbits of Visual Binary Stars, U.S. Naval Observatory (snapshot of August 2026); Hartkopf, Mason &
 * Worley 2001, AJ 122, 3472. Angles are printed to 0.1°, separations to 0.001″.
 */
const published: [string, number, number, OrbitElements, [number, number, number][]][] = [
  ['00491+5749', 12.2762, 57.8152, elements(479.27, 1889.93, 0.497, 12.04, 35.6, 278.0, 269.8), [[2023, 327.6, 13.483], [2025, 328.5, 13.534], [2027, 329.3, 13.582]]],
  ['06451-1643', 101.2872, -16.7161, elements(50.1284, 1994.5715, 0.59142, 7.4957, 136.336, 45.4, 149.161), [[2023, 62.7, 11.333], [2025, 59.0, 11.256], [2027, 55.2, 11.032]]],
  ['07346+3153', 113.6494, 31.8883, elements(459.1, 1959.59, 0.3382, 6.722, 115.107, 41.304, 251.84), [[2023, 50.7, 5.542], [2025, 49.8, 5.66], [2027, 48.9, 5.772]]],
  ['11182+3132', 169.5454, 31.5292, elements(59.8903, 1935.17, 0.40432, 2.50442, 122.187, 100.939, 126.964), [[2023, 142.1, 2.423], [2025, 136.3, 2.591], [2027, 131.1, 2.741]]],
  ['12417-0127', 190.415, -1.4494, elements(169.104, 2005.511, 0.8815, 3.639, 149.46, 35.34, 255.02), [[2023, 353.8, 3.269], [2025, 351.8, 3.474], [2027, 350.0, 3.664]]],
  ['14396-6050', 219.9021, -60.834, elements(79.91, 1955.66, 0.524, 17.66, 79.32, 204.75, 232.3), [[2023, 1.6, 7.451], [2025, 8.4, 8.731], [2027, 13.6, 9.781]]],
  ['15232+3017', 230.801, 30.2883, { ...elements(1, 1, 0.27907, 0.86226, 58.084, 202.827, 39.885), ...elementsFromDays(15204.9, 42612.9) }, [[2023, 340.6, 0.517], [2025, 358.6, 0.699], [2027, 9.5, 0.851]]],
  ['16044-1122', 241.0922, -11.3731, elements(45.9, 1997.22, 0.744, 0.654, 34.5, 25.3, 163.8), [[2023, 15.8, 1.122], [2025, 18.8, 1.102], [2027, 21.9, 1.069]]],
  ['16309+0159', 247.7285, 1.9841, elements(129.0034, 1939.4892, 0.61536, 0.89777, 23.761, 61.239, 148.772), [[2023, 47.8, 1.351], [2025, 49.6, 1.332], [2027, 51.5, 1.311]]],
  ['17304-0104', 262.5991, -1.0628, elements(46.52, 2055.36, 0.171, 0.9679, 99.5, 331.8, 146.7), [[2023, 42.7, 0.182], [2025, 1.8, 0.342], [2027, 349.0, 0.541]]],
  ['18055+0230', 271.364, 2.4998, elements(88.3983, 1895.8216, 0.49803, 4.55038, 120.892, 121.692, 193.376), [[2023, 119.1, 6.724], [2025, 117.4, 6.738], [2027, 115.8, 6.717]]],
  ['20375+1436', 309.387, 14.5952, { ...elements(1, 1, 0.35595, 0.43701, 61.323, 357.179, 168.86), ...elementsFromDays(9745.8, 37961.5) }, [[2023, 315.3, 0.313], [2025, 332.2, 0.432], [2027, 342.3, 0.524]]],
  ['21069+3845', 316.7248, 38.7494, elements(704.858, 1696.004, 0.435, 24.57, 52.018, 174.56, 154.044), [[2023, 153.7, 31.979], [2025, 154.0, 32.081], [2027, 154.3, 32.181]]],
]

describe('published orbits', () => {
  it.each(published)('%s agrees to the last printed digit', (_, rightAscensionDeg, declinationDeg, orbit, rows) => {
    for (const [year, pa, sep] of rows) {
      const polar = ephemerisOfDate(orbit, year, { rightAscensionDeg, declinationDeg, equinoxYear: 2000 })
      expect(Math.abs(angleDifference(polar.paDeg, pa)), `angle in ${year}`).toBeLessThan(0.0601)
      expect(Math.abs(polar.sep - sep), `separation in ${year}`).toBeLessThan(0.00061)
    }
  })
  it('needs precession to agree in the far south', () => {
    const [, ra, dec, orbit] = published[5]!
    expect(ephemeris(orbit, 2023).paDeg).toBeCloseTo(1.80, 2)
    expect(precessionOfAngle(ra, dec, 23)).toBeCloseTo(-0.168, 2)
  })
})

describe('epochs', () => {
  // Explanatory Supplement: JD 2451545.0 = J2000.0 = B2000.001278; the second pair confirmed by a general astronomy library.
  it('follow the two conventions', () => {
    expect(julianYear(2451545)).toBe(2000)
    expect(besselianYear(2451545)).toBeCloseTo(2000.001278, 6)
    expect(julianYear(2460000.5)).toBeCloseTo(2023.149897, 6)
    expect(besselianYear(2460000.5)).toBeCloseTo(2023.151669, 6)
    expect(julianDate(Date.UTC(2000, 0, 1, 12))).toBe(2451545)
  })
})

describe('angles on the sky', () => {
  it('run from north through east', () => {
    expect(polarOf(1, 1).paDeg).toBeCloseTo(45, 12)
    expect(polarOf(0, -1).paDeg).toBeCloseTo(180, 12)
    expect(polarOf(-1, 0).paDeg).toBeCloseTo(270, 12)
    expect(polarOf(-0.3, 0.4)).toEqual({ paDeg: expect.closeTo(323.1301, 4), sep: expect.closeTo(0.5, 12) })
  })
  // FITS WCS paper II (Calabretta & Greisen 2002) for the CD matrix; the figures were confirmed with an independent WCS library.
  it('follow the CD matrix of a rotated image', () => {
    const orientation = { scaleArcsecPerPx: 0.1, upPaDeg: 30, parity: 1 as const }
    const { east, north } = skyOffset(3, -4, orientation)
    expect(polarOf(east, north)).toEqual({ paDeg: expect.closeTo(353.1301, 4), sep: expect.closeTo(0.5, 12) })
    const cd = cdMatrix(orientation)
    const s = 0.1 / 3600
    const psi = Math.PI / 6
    expect(cd[0][0]).toBeCloseTo(-s * Math.cos(psi), 15)
    expect(cd[0][1]).toBeCloseTo(s * Math.sin(psi), 15)
    expect(cd[1][0]).toBeCloseTo(s * Math.sin(psi), 15)
    expect(cd[1][1]).toBeCloseTo(s * Math.cos(psi), 15)
  })
  it('come back from the matrix with their parity', () => {
    for (const parity of [1, -1] as const) {
      for (const upPaDeg of [0, 30, 123.4, 359]) {
        const found = orientationOfCd(cdMatrix({ scaleArcsecPerPx: 0.25, upPaDeg, parity }))!
        expect(found.parity).toBe(parity)
        expect(found.upPaDeg).toBeCloseTo(upPaDeg, 8)
        expect(found.scaleArcsecPerPx).toBeCloseTo(0.25, 10)
        const sky = skyOffset(3, 5, found)
        const back = pixelOffset(sky.east, sky.north, found)
        expect(back.dx).toBeCloseTo(3, 9)
        expect(back.dy).toBeCloseTo(5, 9)
      }
    }
    expect(orientationOfCd([[0, 0], [0, 0]])).toBeNull()
  })
  // Drift method of R. W. Argyle (ed.), Observing and Measuring Visual Double Stars: Z = 15.0411 T cos δ / D.
  it('turn with the sky', () => {
    expect(driftRate(30)).toBeCloseTo(13.02595, 5)
    expect(driftRate(45)).toBeCloseTo(10.63564, 5)
    expect(driftRate(60)).toBeCloseTo(7.52053, 5)
  })
})
