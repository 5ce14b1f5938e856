import type { Pass, PassProgress } from '../api'

/** Milliseconds between two reports. */
const EVERY = 100
/** Half-life of the smoothed rate, ms. */
const HALF_LIFE = 1500

/** Reports how far a pass is, at most ten times a second, with a rate smoothed by a half-life. */
export class ProgressMeter {
  readonly #report: (progress: PassProgress) => void
  readonly #now: () => number
  #pass: Pass = 'open'
  #round = 0
  #total = 0
  #done = 0
  #rate = 0
  #weight = 0
  #reportedAt = 0
  #reportedDone = 0

  constructor(report: (progress: PassProgress) => void, now: () => number = () => performance.now()) {
    this.#report = report
    this.#now = now
  }

  begin(pass: Pass, round: number, total: number, done = 0): void {
    this.#pass = pass
    this.#round = round
    this.#total = total
    this.#done = done
    this.#rate = 0
    this.#weight = 0
    this.#reportedAt = this.#now()
    this.#reportedDone = done
    this.#send(this.#reportedAt)
  }

  add(frames: number): void {
    this.#done += frames
    const now = this.#now()
    const elapsed = now - this.#reportedAt
    if (elapsed < EVERY) return
    const keep = 2 ** (-elapsed / HALF_LIFE)
    const rate = (this.#done - this.#reportedDone) / elapsed * 1000
    this.#rate = this.#rate * keep + rate * (1 - keep)
    this.#weight = this.#weight * keep + (1 - keep)
    this.#reportedAt = now
    this.#reportedDone = this.#done
    this.#send(now)
  }

  /** The last report of a pass: all done. */
  end(): void {
    this.#done = this.#total
    this.#send(this.#now())
  }

  #send(_now: number): void {
    const framesPerSecond = this.#weight > 0 ? this.#rate / this.#weight : 0
    const left = this.#total - this.#done
    this.#report({
      pass: this.#pass, round: this.#round, done: this.#done, total: this.#total, framesPerSecond,
      secondsLeft: left === 0 ? 0 : framesPerSecond > 0 ? left / framesPerSecond : null,
    })
  }
}
