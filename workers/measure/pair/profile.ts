/**
 * The shared star image as a sum of smooth functions of radius times harmonics of the angle: cubic B-splines on knots that
 * lie close together in the core and wide apart in the halo. No form is assumed beyond smoothness, so that the diffraction
 * rings, the core's residual blur and the halo of the seeing all find their place, and the companion does not have to make up
 * for a form that does not fit.
 */
export interface Profile {
  /** Number of functions. */
  readonly count: number
  /** Harmonic and radius of the middle of each function. */
  readonly terms: readonly { harmonic: number, radius: number }[]
  /**
   * Values of all functions at an offset from the star's centre, and their derivatives with respect to the offset.
   * `value`, `dx` and `dy` have `count` entries.
   */
  at(x: number, y: number, value: Float64Array, dx: Float64Array, dy: Float64Array): void
}

/**
 * @param fwhm of the star image, px
 * @param radius out to which the functions reach, px
 * @param harmonics highest harmonic of the angle; 0 is a round image
 */
export function createProfile(fwhm: number, radius: number, harmonics: number): Profile {
  const knots = knotsFor(fwhm, radius)
  // All splines end inside the radius: together they could else make up a constant, which is the sky's.
  const round = knots.length - 2
  // Angular functions vanish at the centre and are not needed in the far halo, where the image is round.
  const angular = knots.filter(knot => knot < Math.min(radius, 5 * fwhm)).length
  const spans: { harmonic: number, sine: boolean, spline: number }[] = []
  for (let k = 0; k < round; k++) spans.push({ harmonic: 0, sine: false, spline: k })
  for (let harmonic = 1; harmonic <= harmonics; harmonic++) {
    for (let k = 2; k < Math.min(round, angular); k += harmonic > 2 ? 2 : 1) {
      spans.push({ harmonic, sine: false, spline: k })
      spans.push({ harmonic, sine: true, spline: k })
    }
  }
  const pieces = piecesOf(knots, round)
  const splines = new Float64Array(round)
  const slopes = new Float64Array(round)
  return {
    count: spans.length,
    terms: spans.map(({ harmonic, spline }) => ({ harmonic, radius: knots[Math.min(knots.length - 1, spline)]! })),
    at(x, y, value, dx, dy) {
      const r = Math.sqrt(x * x + y * y)
      splinesAt(knots, pieces, r, splines, slopes)
      // d r = (x, y)/r, d φ = (−y, x)/r².
      const ux = r > 0 ? x / r : 1
      const uy = r > 0 ? y / r : 0
      const safe = 1 / Math.max(r, 1e-9)
      let harmonic = 0
      let c = 1
      let s = 0
      for (let i = 0; i < spans.length; i++) {
        const span = spans[i]!
        while (harmonic < span.harmonic) {
          harmonic++
          const turned = c * ux - s * uy
          s = s * ux + c * uy
          c = turned
        }
        const b = splines[span.spline]!
        const db = slopes[span.spline]!
        const wave = span.sine ? s : c
        const around = (span.sine ? c : -s) * harmonic * safe
        value[i] = b * wave
        dx[i] = db * ux * wave - b * around * uy
        dy[i] = db * uy * wave + b * around * ux
      }
    },
  }
}

/** Radii of the knots, from 0: steps of a fifth of the width in the core, growing by a third outside, beyond the radius at the end. */
function knotsFor(fwhm: number, radius: number): number[] {
  const fine = Math.max(0.7, fwhm / 5)
  const knots = [0]
  let step = fine
  while (knots.at(-1)! < radius) {
    if (knots.at(-1)! > 1.6 * fwhm) step *= 1.33
    knots.push(knots.at(-1)! + step)
  }
  return knots
}

/**
 * Cubic B-splines on a line of knots that is mirrored at 0, so that the image is smooth at the centre: spline k has its middle
 * at knot k, and those that reach over 0 are folded back. For each span of knots the four splines that live there, as
 * cubics in the distance from the span's beginning.
 */
interface Piece { spline: number, c0: number, c1: number, c2: number, c3: number }

function piecesOf(knots: readonly number[], count: number): Piece[][] {
  return knots.slice(0, -1).map((from, span) => {
    const width = knots[span + 1]! - from
    const pieces: Piece[] = []
    for (let middle = span - 1; middle <= span + 2; middle++) {
      const spline = Math.abs(middle)
      if (spline >= count) continue
      const t = Array.from({ length: 5 }, (_, i) => knotOf(knots, middle - 2 + i))
      const here = bump(t, from)
      const there = bump(t, from + width)
      // Hermite's form is exact: each piece is a cubic.
      const rise = (there.value - here.value) / width
      pieces.push({ spline, c0: here.value, c1: here.slope, c2: (3 * rise - 2 * here.slope - there.slope) / width, c3: (here.slope + there.slope - 2 * rise) / (width * width) })
    }
    return pieces
  })
}

function splinesAt(knots: readonly number[], pieces: readonly Piece[][], r: number, values: Float64Array, slopes: Float64Array): void {
  values.fill(0)
  slopes.fill(0)
  let span = 0
  while (span < knots.length - 1 && r >= knots[span + 1]!) span++
  if (span >= pieces.length) return
  const u = r - knots[span]!
  for (const { spline, c0, c1, c2, c3 } of pieces[span]!) {
    values[spline]! += c0 + u * (c1 + u * (c2 + u * c3))
    slopes[spline]! += c1 + u * (2 * c2 + 3 * u * c3)
  }
}

/** Knot k of the mirrored line; beyond the last one they go on in steps of the last. */
function knotOf(knots: readonly number[], k: number): number {
  if (k < 0) return -knotOf(knots, -k)
  const last = knots.length - 1
  return k <= last ? knots[k]! : knots[last]! + (k - last) * (knots[last]! - knots[last - 1]!)
}

/** The cubic B-spline on five knots (Cox-de Boor), and its slope. */
function bump(t: readonly number[], x: number): { value: number, slope: number } {
  const level = (degree: number): number[] => {
    let b: number[] = Array.from({ length: 4 }, (_, i) => (x >= t[i]! && x < t[i + 1]! ? 1 : 0))
    for (let d = 1; d <= degree; d++) {
      b = Array.from({ length: 4 - d }, (_, i) => (x - t[i]!) / (t[i + d]! - t[i]!) * b[i]! + (t[i + d + 1]! - x) / (t[i + d + 1]! - t[i + 1]!) * b[i + 1]!)
    }
    return b
  }
  const quadratic = level(2)
  return { value: level(3)[0]!, slope: 3 * (quadratic[0]! / (t[3]! - t[0]!) - quadratic[1]! / (t[4]! - t[1]!)) }
}
