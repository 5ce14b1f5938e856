/** Places of a star that crosses the field of a telescope at rest. Entry k of each column belongs together. */
export interface DriftTrack {
  /** Numbers of the frames in the capture, ascending. */
  frame: Int32Array
  /** Seconds since the first frame of the capture. */
  seconds: Float64Array
  /** Frame pixels, x right, y down. */
  x: Float64Array
  y: Float64Array
  /** Half width at half maximum of the mean star image, px. */
  halfWidthPx: number
  /** Frames of the capture in which no star was found near the track. */
  without: number
}

/** A straight track through a DriftTrack, with errors that know of the air's slow image motion. */
export interface DriftFit {
  /** Speed, px a second, and its standard error. */
  speed: number
  speedErr: number
  /** Direction of motion, degrees counter-clockwise on the screen from screen right, and its standard error. */
  directionDeg: number
  directionErrDeg: number
  /** Places left out because they lie far off the track. */
  leftOut: number
  /** Used places: seconds, and distance from the track along and across it, px. */
  residuals: { seconds: Float64Array, along: Float64Array, across: Float64Array }
  /** Image motion about the track, px rms, along and across. */
  motionPx: { along: number, across: number }
  /** Length of the track, px, and its duration, s. */
  lengthPx: number
  durationS: number
}

/** What one drift says of scale and orientation. */
export interface DriftCalibration {
  declinationDeg: number
  scaleArcsecPerPx: number
  scaleErr: number
  /** Where west lies: degrees counter-clockwise on the screen from screen right. */
  westDirectionDeg: number
  angleErr: number
  fit: DriftFit
  framesUsed: number
  framesWithoutStar: number
}

/** A drift that cannot be used; the message says why and what to do. */
export class DriftError extends Error {
  override name = 'DriftError'
}
