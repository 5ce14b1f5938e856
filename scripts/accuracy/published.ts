/**
 * What a careful SciPy, scikit-image and OpenCV pipeline reached on a set of simulated captures (figures by key, see
 * judge.ts). They are measurements by others on those very captures; for captures of other names there is no comparison.
 * "restored10" is its unrestored error less 15 %. "far" is half of the share of frames that its best correlation put more than 3 px off.
 */
import type { References } from './truth'

export const publishedSource = 'SciPy/OpenCV pipeline'

export const publishedFigures: Record<string, References> = {
  double: { score: 0.978, median: 0.17, best10median: 0.08, best10rms: 0.10, strehl1: 0.531, strehl10: 0.432, strehl50: 0.311, strehl100: 0.244 },
  triple: { score: 0.981, median: 0.17, best10median: 0.08, best10rms: 0.10, strehl1: 0.386, strehl10: 0.300, strehl50: 0.213, strehl100: 0.167 },
  star: { score: 0.975 },
  planet: { score: 0.848, tiltRms: 0.84, nrms0: 0.145, nrms100: 0.108, nrms50: 0.094, nrms10: 0.084, restored10: 0.0714 },
  terrain: { score: 0.763, best10rms: 0.20, nrms0: 0.781, nrms100: 0.404, nrms50: 0.345, nrms10: 0.256, restored10: 0.2176 },
}
