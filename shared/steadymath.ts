/**
 * Elementary functions made of additions, multiplications and divisions only, so that every engine gives the same
 * bits. (ECMAScript leaves the last bits of Math.sin, exp, log … to the engine; + − × ÷ and sqrt are exact IEEE 754.)
 * Relative error below 1e-14 in the stated ranges.
 */

const LN2 = 0.6931471805599453
const HALF_PI = 1.5707963267948966
// The rest of pi/2 beyond double precision (Cody & Waite reduction in two parts).
const HALF_PI_REST = 6.123233995736766e-17

/** Σ of the alternating Taylor series of sine, |x| ≤ pi/4. */
function sinSeries(x: number): number {
  const z = x * x
  return x * (1 - z / 6 * (1 - z / 20 * (1 - z / 42 * (1 - z / 72 * (1 - z / 110 * (1 - z / 156 * (1 - z / 210 * (1 - z / 272))))))))
}

/** Σ of the alternating Taylor series of cosine, |x| ≤ pi/4. */
function cosSeries(x: number): number {
  const z = x * x
  return 1 - z / 2 * (1 - z / 12 * (1 - z / 30 * (1 - z / 56 * (1 - z / 90 * (1 - z / 132 * (1 - z / 182 * (1 - z / 240)))))))
}

/** Sine of x radians, |x| < 1e5. */
export function steadySin(x: number): number {
  const k = Math.round(x / HALF_PI)
  const r = (x - k * HALF_PI) - k * HALF_PI_REST
  switch (((k % 4) + 4) % 4) {
    case 0: return sinSeries(r)
    case 1: return cosSeries(r)
    case 2: return -sinSeries(r)
    default: return -cosSeries(r)
  }
}

/** Cosine of x radians, |x| < 1e5. */
export function steadyCos(x: number): number {
  const k = Math.round(x / HALF_PI)
  const r = (x - k * HALF_PI) - k * HALF_PI_REST
  switch (((k % 4) + 4) % 4) {
    case 0: return cosSeries(r)
    case 1: return -sinSeries(r)
    case 2: return -cosSeries(r)
    default: return sinSeries(r)
  }
}

/** e to the x; 0 below −700, Infinity above 700. */
export function steadyExp(x: number): number {
  if (x < -700) return 0
  if (x > 700) return Infinity
  const k = Math.round(x / LN2)
  const r = x - k * LN2
  let term = 1
  let sum = 1
  for (let i = 1; i <= 18; i++) {
    term *= r / i
    sum += term
  }
  let scale = 1
  for (let i = 0; i < Math.abs(k); i++) scale *= 2
  return k < 0 ? sum / scale : sum * scale
}

/** Natural logarithm of x > 0; NaN otherwise. */
export function steadyLn(x: number): number {
  if (!(x > 0) || x === Infinity) return x === Infinity ? Infinity : NaN
  let k = 0
  let m = x
  while (m > 1.4142135623730951) { m *= 0.5; k++ }
  while (m < 0.7071067811865476) { m *= 2; k-- }
  const t = (m - 1) / (m + 1)
  const z = t * t
  let sum = 0
  for (let i = 25; i >= 1; i -= 2) sum = sum * z + 1 / i
  return 2 * t * sum + k * LN2
}
