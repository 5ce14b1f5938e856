/**
 * Seeded random numbers, the same on every machine: a small counting generator (sfc32, C. Doty-Humphrey's
 * published design) with one independent stream for each (seed, stream, index), so that frames can be made in any order.
 */
export interface Random {
  /** Uniform in [0, 1), 32 bits. */
  uniform(): number
  /** Standard normal. */
  normal(): number
  /** Poisson with the given mean ≥ 0; from mean 40 on a rounded normal with the same mean and variance. */
  poisson(mean: number): number
}

/** Scrambles a 32-bit integer (finaliser of MurmurHash3). */
function scramble(value: number): number {
  let x = value | 0
  x = Math.imul(x ^ (x >>> 16), 0x85EBCA6B)
  x = Math.imul(x ^ (x >>> 13), 0xC2B2AE35)
  return (x ^ (x >>> 16)) | 0
}

export function createRandom(seed: number, stream = 0, index = 0): Random {
  let a = scramble(seed + 0x9E3779B9)
  let b = scramble(a ^ (stream + 0x7F4A7C15))
  let c = scramble(b ^ (index + 0x165667B1))
  let counter = 1
  const next = () => {
    const t = (((a + b) | 0) + counter) | 0
    counter = (counter + 1) | 0
    a = b ^ (b >>> 9)
    b = (c + (c << 3)) | 0
    c = (c << 21) | (c >>> 11)
    c = (c + t) | 0
    return t >>> 0
  }
  for (let i = 0; i < 15; i++) next()
  const uniform = () => next() / 4294967296

  let spare = 0
  let hasSpare = false
  const normal = () => {
    if (hasSpare) {
      hasSpare = false
      return spare
    }
    // Marsaglia's polar method: two normals from two uniforms, no sine or cosine.
    let u, v, s
    do {
      u = 2 * uniform() - 1
      v = 2 * uniform() - 1
      s = u * u + v * v
    } while (s >= 1 || s === 0)
    const scale = Math.sqrt(-2 * Math.log(s) / s)
    spare = v * scale
    hasSpare = true
    return u * scale
  }

  const poisson = (mean: number) => {
    if (!(mean > 0)) return 0
    if (mean >= 40) return Math.max(0, Math.round(mean + Math.sqrt(mean) * normal()))
    const limit = Math.exp(-mean)
    let count = 0
    let product = uniform()
    while (product > limit) {
      count++
      product *= uniform()
    }
    return count
  }
  return { uniform, normal, poisson }
}
