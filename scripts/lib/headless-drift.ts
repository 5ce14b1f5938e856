import { reduce360 } from '../../shared/astro/angles'
import type { FrameReader } from '../../workers/decode/types'
import { calibrateDrift, DriftError } from '../../workers/measure/drift/index'
import { InputError, type HeadlessInput } from './headless-input'

/**
 * What a drift says, as a file. `westDirectionDeg`: degrees counter-clockwise on the screen from screen right.
 * `northAngleDeg`: where north lies, from screen up (towards row 0) counter-clockwise through screen left. A position angle is
 * the angle on the screen, measured alike, minus this one; in a mirrored image this one minus the angle on the screen.
 * `upPositionAngleDeg`: the position angle of screen up.
 * A drift cannot tell the parity: where it was not given, the angles are those of an image that is not mirrored, and
 * `parityGiven` is false.
 */
export async function calibrationJson(reader: FrameReader, { declinationDeg, parity }: NonNullable<HeadlessInput['drift']>): Promise<string> {
  const drift = await calibrateDrift(reader, declinationDeg).catch((reason: unknown) => {
    throw reason instanceof DriftError ? new InputError(reason.message) : reason
  })
  const mirrored = parity === 'mirrored'
  // North is 90° counter-clockwise from west as the sky is seen (north up, west right), clockwise in a mirrored image.
  const northAngleDeg = reduce360(drift.westDirectionDeg + (mirrored ? 180 : 0))
  const { fit } = drift
  return `${JSON.stringify({
    method: 'drift', capture: reader.facts.name, fingerprint: reader.facts.fingerprint, declinationDeg, equinox: 'date',
    start: reader.facts.times.start,
    scaleArcsecPerPx: drift.scaleArcsecPerPx, scaleErr: drift.scaleErr,
    westDirectionDeg: drift.westDirectionDeg, northAngleDeg, upPositionAngleDeg: reduce360(mirrored ? northAngleDeg : -northAngleDeg), angleErr: drift.angleErr,
    parity: parity ?? 'normal', parityGiven: parity !== null,
    framesUsed: drift.framesUsed, framesWithoutStar: drift.framesWithoutStar, framesLeftOut: fit.leftOut,
    lengthPx: fit.lengthPx, durationS: fit.durationS, imageMotionPx: fit.motionPx,
    residuals: { seconds: [...fit.residuals.seconds], alongPx: [...fit.residuals.along], acrossPx: [...fit.residuals.across] },
  }, null, 2)}\n`
}
