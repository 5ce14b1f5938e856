/** Caps that hold before anything is allocated, whatever a header claims. */
import { CaptureError } from './types'

/** Largest side of a frame, px, and largest frame, samples in all planes. */
export const MAX_SIDE = 65_536
export const MAX_FRAME_SAMPLES = 400_000_000
/** Most frames of one capture, and most pages or files of a sequence. */
export const MAX_FRAMES = 50_000_000
export const MAX_PAGES = 200_000

/** Throws "absurd-size" for a frame that no camera makes or no browser holds. */
export function checkFrameSize(name: string, width: number, height: number, planes: number): void {
  if (!Number.isInteger(width) || !Number.isInteger(height) || width < 1 || height < 1 || width > MAX_SIDE || height > MAX_SIDE) {
    throw new CaptureError('absurd-size', `${name} says its frames are ${width} × ${height} pixels, which cannot be. The header is damaged, or the file is of another kind; copy it again from the card.`)
  }
  if (width * height * planes > MAX_FRAME_SAMPLES) {
    throw new CaptureError('too-large', `The frames of ${name} have ${width} × ${height} pixels. Lull works with frames of up to ${MAX_FRAME_SAMPLES / 1e6} million samples; record a smaller region of the detector.`)
  }
}
