/** An image to measure on: luminance, height × width, in any linear unit; row 0 at the top. */
export interface MeasureImage { samples: Float32Array, width: number, height: number }

/** A star image on the stack, px (x right, y down); `flux` relative to the first component. */
export interface Component { x: number, y: number, flux: number }

/** The shape that all components share, about their centres, and how it was fitted. */
export interface PairFit {
  components: Component[]
  /** Full width at half maximum of the shared star image, px. */
  fwhmPx: number
  /** Residual over the expected noise, as reduced chi-squared; 1 is as good as the noise allows. */
  chiSquared: number
  /** Height of the first component's core over the background, in image units. */
  peak: number
}

/** A fit that cannot be made; the message says why, for the user. */
export class MeasureError extends Error {
  override name = 'MeasureError'
}
