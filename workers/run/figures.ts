import type { Optics, StackImage } from '../api'
import type { StackFigures } from '../../shared/schemas/run'
import type { Stacker } from './stacker'
import type { Surveyed } from './survey-pass'

export class Figurer {
  constructor(readonly stacker: Stacker, readonly surveyed: Surveyed, readonly optics: Optics | null) {}
  of(image: StackImage): StackFigures {
    return { count: image.count, fraction: image.count / this.stacker.ranked, sharpness: 0, noise: 1, peak: 0, signalToNoise: 0, fwhmPx: null, fwhmErrPx: null, strehl: null }
  }
  ofAverage(image: StackImage, _frames: number): StackFigures { return { ...this.of(image), fraction: 1 } }
}
