/**
 * Scale and orientation from a drift: a star crosses the field of a telescope at rest, westward, at 15.041″ cos δ a second.
 * `calibrateDrift` tells the whole story; shared/astro/drift.ts makes one calibration of several.
 */
import { driftRate } from '../../../shared/astro/angles'
import type { FrameReader } from '../../decode/types'
import { fitTrack } from './fit'
import { trackStar, type TrackOptions } from './track'
import { DriftError, type DriftCalibration } from './types'

export { fitTrack } from './fit'
export { trackStar } from './track'
export * from './types'

/** @param declinationDeg of the star, for the equator of date. Throws DriftError with words for the user. */
export async function calibrateDrift(reader: FrameReader, declinationDeg: number, options: TrackOptions = {}): Promise<DriftCalibration> {
  if (!(Math.abs(declinationDeg) < 89.9)) throw new DriftError('A star so near the pole hardly drifts; choose one nearer the equator.')
  const track = await trackStar(reader, options)
  const fit = fitTrack(track)
  const scale = driftRate(declinationDeg) / fit.speed
  return {
    declinationDeg, scaleArcsecPerPx: scale, scaleErr: scale * fit.speedErr / fit.speed,
    westDirectionDeg: fit.directionDeg, angleErr: fit.directionErrDeg, fit,
    framesUsed: fit.residuals.seconds.length, framesWithoutStar: track.without,
  }
}
