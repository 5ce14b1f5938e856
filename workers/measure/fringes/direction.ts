import { eachFrequency, type MeanSpectra, type SpectrumBlock } from './spectrum'

/**
 * Which of the two stars is the brighter: the triple correlation at (d, 0) against that at (−d, 0). Σ I²(x) I(x + d) is β where d
 * leads from the brighter star to the fainter, and β² the other way (for two points of 1 and β); the difference is 0 for equal
 * stars (Lohmann, Weigelt & Wirnitzer 1983, Appl. Opt. 22, 4028; from memory).
 * @returns sign 1 where (dx, dy) leads to the fainter star, −1 where it comes from it, and how many standard errors (over blocks
 * of time) stand behind that
 */
export function directionOf(spectra: MeanSpectra, dx: number, dy: number): { sign: 1 | -1, significance: number } {
  const values = spectra.blocks.map(block => asymmetry(spectra, block, dx, dy))
  const mean = values.reduce((sum, value) => sum + value, 0) / values.length
  const spread = Math.sqrt(values.reduce((sum, value) => sum + (value - mean) ** 2, 0) / Math.max(1, values.length - 1) / values.length)
  return { sign: mean >= 0 ? 1 : -1, significance: values.length < 5 ? 0 : Math.abs(mean) / Math.max(spread, 1e-300) }
}

function asymmetry({ n, cut }: MeanSpectra, { third, frames }: SpectrumBlock, dx: number, dy: number): number {
  let sum = 0
  // third is F₂F₁*, whose inverse transform at e is g(e) = Σ I²(x + e) I(x); g(−d) is Σ I²(x) I(x + d). In g(−d) − g(d) the
  // real parts cancel, and both halves of the plane give the same.
  eachFrequency(cut, cut, (index, kx, ky) => {
    sum += third[2 * index + 1]! * Math.sin(2 * Math.PI * (kx * dx + ky * dy) / n)
  })
  return 4 * sum / (n * n * frames)
}
