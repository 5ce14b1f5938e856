/** Wiener filter and Richardson-Lucy iteration with a transfer that depends on frequency alone. */
import { createConvolver, inSquares, type Convolver, type Pause, type RadialCurve } from './convolve'
import { steadyShare, type RadialSpectra } from './spectra'

/** Wiener 1949: H / (H² + 1/SNR) for a real transfer H and the ratio of the powers of scene and noise. */
export const wienerFactor = (transfer: number, signalToNoisePower: number): number => transfer / (transfer * transfer + 1 / signalToNoisePower)

/** Largest factor by which any frequency is raised. */
export const MOST_RAISE = 8

/**
 * The filter as a curve. With a constant ratio it is Wiener's, scaled to leave the mean; with the spectra of two halves the
 * ratio is measured at each frequency: share of the power that is signal, over the transfer.
 */
export function wienerCurve(transfer: (f: number) => number, spectra: RadialSpectra | null, signalToNoisePower: number | null): RadialCurve {
  const step = spectra ? spectra.step / 2 : 1 / 256
  const values: number[] = []
  const share = spectra && signalToNoisePower === null ? steadyShare(spectra) : null
  const middle = signalToNoisePower === null ? 1 : wienerFactor(1, signalToNoisePower)
  for (let i = 0; i * step <= 0.7072; i++) {
    const t = transfer(i * step)
    if (share) values.push(Math.min(MOST_RAISE, 1 / Math.max(1e-6, t)) * shareAt(share, i / 2))
    else values.push(Math.min(MOST_RAISE, wienerFactor(t, signalToNoisePower ?? 1000) / middle))
  }
  values[0] = 1
  return { step, values }
}

/** The share at a place in bins; bin i stands for i + ½. Beyond the last bin there is none. */
function shareAt(share: Float64Array, at: number): number {
  const x = at - 0.5
  if (x <= 0) return share[0]!
  const k = Math.floor(x)
  if (k >= share.length - 1) return k === share.length - 1 ? share[k]! : 0
  return share[k]! + (x - k) * (share[k + 1]! - share[k]!)
}

export async function filterPlane(image: Float32Array, width: number, height: number, curve: RadialCurve, pause: Pause): Promise<Float32Array> {
  let convolver: Convolver | null = null
  return await inSquares(image, width, height, async (window, n) => {
    convolver ??= createConvolver(n, curve)
    const out = new Float32Array(n * n)
    convolver.apply(window, out)
    window.set(out)
  }, pause)
}

export interface LucyPlan {
  transfer: RadialCurve
  /** At most so many rounds. */
  iterations: number
  /** Level of the dark sky: positivity holds above it. */
  floor: number
  /** What differs from half to half, rms; the iteration ends where what is left unexplained is not more. 0: only the count ends it. */
  noise: number
}

const MOST_FACTOR = 10

/**
 * Richardson 1972, J. Opt. Soc. Am. 62, 55; Lucy 1974, Astron. J. 79, 745: u ← u · [(d / (u ∗ h)) ⋆ h] on n × n values, cyclic,
 * with a symmetric h. Keeps the sum, and never goes below 0. `u` is the start and the result. Returns the rounds made.
 */
export async function richardsonLucy(data: Float32Array, u: Float32Array, blur: Convolver, iterations: number, noise: number, pause: Pause): Promise<number> {
  const size = data.length
  const blurred = new Float32Array(size)
  const factor = new Float32Array(size)
  let highest = 0
  for (let i = 0; i < size; i++) highest = Math.max(highest, data[i]!)
  const least = Math.max(1e-12 * highest, 1e-30)
  for (let round = 0; round < iterations; round++) {
    blur.apply(u, blurred)
    let square = 0
    for (let i = 0; i < size; i++) {
      const off = data[i]! - blurred[i]!
      square += off * off
      // A blurred value near 0 beside bright ones is rounding: no single round may raise anything tenfold.
      factor[i] = blurred[i]! > least ? Math.min(MOST_FACTOR, data[i]! / blurred[i]!) : data[i]! > least ? 1 : 0
    }
    if (noise > 0 && square <= noise * noise * size) return round
    await pause()
    blur.apply(factor, blurred)
    for (let i = 0; i < size; i++) u[i] = Math.max(0, u[i]! * blurred[i]!)
    await pause()
  }
  return iterations
}

export async function lucyPlane(image: Float32Array, width: number, height: number, plan: LucyPlan, pause: Pause): Promise<{ samples: Float32Array, rounds: number }> {
  let blur: Convolver | null = null
  let rounds = 0
  const samples = await inSquares(image, width, height, async (window, n) => {
    blur ??= createConvolver(n, plan.transfer)
    // Positivity is meant for light: a little sky noise below the floor is kept as it is by lifting everything.
    const lift = 3 * plan.noise - plan.floor
    const data = Float32Array.from(window, value => Math.max(0, value + lift))
    let mean = 0
    for (const value of data) mean += value
    const u = new Float32Array(data.length).fill(mean / data.length)
    rounds = Math.max(rounds, await richardsonLucy(data, u, blur, plan.iterations, plan.noise, pause))
    for (let i = 0; i < u.length; i++) window[i] = u[i]! - lift
  }, pause)
  return { samples, rounds }
}
