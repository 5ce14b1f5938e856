/** Small dense symmetric systems, in place, by Cholesky's method. */

/** Lower factor of a positive definite n × n matrix (row-major); null where it is not one. */
export function cholesky(matrix: Float64Array, n: number): Float64Array | null {
  const factor = new Float64Array(n * n)
  for (let i = 0; i < n; i++) {
    for (let j = 0; j <= i; j++) {
      let sum = matrix[i * n + j]!
      for (let k = 0; k < j; k++) sum -= factor[i * n + k]! * factor[j * n + k]!
      if (i !== j) factor[i * n + j] = sum / factor[j * n + j]!
      else if (sum > 0) factor[i * n + i] = Math.sqrt(sum)
      else return null
    }
  }
  return factor
}

/** Solves (L Lᵀ) x = b. */
export function solveCholesky(factor: Float64Array, n: number, b: Float64Array): Float64Array {
  const x = b.slice()
  for (let i = 0; i < n; i++) {
    for (let k = 0; k < i; k++) x[i]! -= factor[i * n + k]! * x[k]!
    x[i]! /= factor[i * n + i]!
  }
  for (let i = n - 1; i >= 0; i--) {
    for (let k = i + 1; k < n; k++) x[i]! -= factor[k * n + i]! * x[k]!
    x[i]! /= factor[i * n + i]!
  }
  return x
}
