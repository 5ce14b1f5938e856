/**
 * How an extended stack compares with the scene seen through a perfect telescope: the scene convolved with the
 * diffraction-limited point-spread function and the pixel, put in place and scaled by least squares.
 */
import { createForward, createInverse, spectrumLength, type InverseTransform } from '../../workers/register/fft2'
import type { StackImage } from '../../workers/api'
import { lambdaOverDPx } from '../../shared/optics'
import type { KnownCapture } from './truth'

/** Diffraction transfer of an unobstructed circle at frequency f (cycles/px), cut-off fc = 1/(λ/D in px). Goodman, Fourier Optics, ch. 6. */
function diffraction(f: number, fc: number): number {
  const u = f / fc
  return u >= 1 ? 0 : 2 / Math.PI * (Math.acos(u) - u * Math.sqrt(1 - u * u))
}

const sinc = (x: number): number => (x === 0 ? 1 : Math.sin(Math.PI * x) / (Math.PI * x))

/** @returns rms error over the scene's rms contrast, and the stack's transfer in rings about `at`, in units of the cut-off */
export function sceneErrors(image: StackImage, known: Pick<KnownCapture, 'sceneImage' | 'optics' | 'wavelengthsNm'>, at: readonly number[] = [0.2, 0.3]): { error: number, transfer: number[] } {
  const scene = known.sceneImage!
  const n = 512
  const cut = n / 2 - 1
  const forward = createForward(n, cut)
  let errors = 0
  const transfers: number[][] = []
  const planes = Math.min(image.planes, scene.planes.length)
  for (let plane = 0; plane < planes; plane++) {
    const fc = 1 / lambdaOverDPx({ ...known.optics, wavelengthNm: known.wavelengthsNm[plane] ?? known.optics.wavelengthNm })
    const { error, transfer } = onePlane(image.samples.subarray(plane * image.width * image.height, (plane + 1) * image.width * image.height), image.width, image.height, scene.planes[plane]!, scene.width, scene.height, fc, n, cut, forward, scene.blurred ?? false, at)
    errors += error
    transfers.push(transfer)
  }
  return { error: errors / planes, transfer: at.map((_, k) => transfers.reduce((s, t) => s + t[k]!, 0) / planes) }
}

function onePlane(stack: Float32Array, width: number, height: number, scene: Float32Array, sceneWidth: number, sceneHeight: number, fc: number, n: number, cut: number, forward: ReturnType<typeof createForward>, blurred: boolean, rings: readonly number[]) {
  // The scene, blurred in Fourier space on a grid that holds it, mirrored edges not needed: only its middle is compared.
  const window = new Float32Array(n * n)
  let mean = 0
  for (const v of scene) mean += v
  mean /= scene.length
  for (let y = 0; y < sceneHeight; y++) for (let x = 0; x < sceneWidth; x++) window[y * n + x] = scene[y * sceneWidth + x]! - mean
  const spectrum = new Float64Array(spectrumLength(cut))
  forward.forward(window, spectrum)
  for (let kx = 0, o = 0; kx <= cut && !blurred; kx++) {
    for (let ky = -cut; ky <= cut; ky++, o += 2) {
      const fx = kx / n
      const fy = ky / n
      const t = diffraction(Math.hypot(fx, fy), fc) * sinc(fx) * sinc(fy)
      spectrum[o]! *= t
      spectrum[o + 1]! *= t
    }
  }
  // A dozen pixels at the border are left out, where shifted frames do not overlap.
  const margin = 12
  const w = width - 2 * margin
  const h = height - 2 * margin
  // Where the stack's middle lies in the scene: best of a search about the scene's middle by whole, then fractional pixels.
  const at = (dx: number, dy: number) => sampled(spectrum, n, cut, (sceneWidth - width) / 2 + margin + dx, (sceneHeight - height) / 2 + margin + dy, w, h)
  let best = { dx: 0, dy: 0, error: Infinity }
  for (let step = 8, reach = 3; step >= 0.0625; step /= 2, reach = 1) {
    const centre = { ...best }
    for (let j = -reach; j <= reach; j++) {
      for (let k = -reach; k <= reach; k++) {
        if (best.error < Infinity && j === 0 && k === 0) continue
        const dx = centre.dx + k * step
        const dy = centre.dy + j * step
        const error = fitError(stack, width, margin, w, h, at(dx, dy))
        if (error < best.error) best = { dx, dy, error }
      }
    }
  }
  const model = at(best.dx, best.dy)
  return { error: best.error, transfer: transferOf(stack, width, margin, w, h, model, fc, rings) }
}

let inverseCache: { plane: Float32Array, key: string } | null = null

/** The blurred scene from (x0, y0), w × h, shifted in Fourier space. */
function sampled(spectrum: Float64Array, n: number, cut: number, x0: number, y0: number, w: number, h: number): Float32Array {
  const ix = Math.floor(x0)
  const iy = Math.floor(y0)
  const fx = x0 - ix
  const fy = y0 - iy
  const key = `${fx.toFixed(4)} ${fy.toFixed(4)} ${spectrum[2]} ${spectrum[8]}`
  if (inverseCache?.key !== key) {
    const moved = spectrum.slice()
    for (let kx = 0, o = 0; kx <= cut; kx++) {
      for (let ky = -cut; ky <= cut; ky++, o += 2) {
        const angle = 2 * Math.PI * (kx * fx + ky * fy) / n
        const c = Math.cos(angle)
        const s = Math.sin(angle)
        const re = moved[o]!
        moved[o] = re * c - moved[o + 1]! * s
        moved[o + 1] = re * s + moved[o + 1]! * c
      }
    }
    const plane = new Float32Array(n * n)
    inverseOf(n, cut).inverse(moved, plane)
    inverseCache = { plane, key }
  }
  const out = new Float32Array(w * h)
  for (let y = 0; y < h; y++) for (let x = 0; x < w; x++) out[y * w + x] = inverseCache.plane[((y + iy + n) % n) * n + (x + ix + n) % n]!
  return out
}
let inverseMade: InverseTransform | null = null
function inverseOf(n: number, cut: number): InverseTransform {
  inverseMade ??= createInverse(n, cut)
  return inverseMade
}

/** rms of (stack − a·model − b) over a·rms(model − mean). */
function fitError(stack: Float32Array, width: number, margin: number, w: number, h: number, model: Float32Array): number {
  let s = 0
  let m = 0
  let ss = 0
  let mm = 0
  let sm = 0
  const count = w * h
  for (let y = 0; y < h; y++) {
    for (let x = 0; x < w; x++) {
      const a = stack[(y + margin) * width + x + margin]!
      const b = model[y * w + x]!
      s += a
      m += b
      ss += a * a
      mm += b * b
      sm += a * b
    }
  }
  const vs = ss / count - (s / count) ** 2
  const vm = mm / count - (m / count) ** 2
  const c = sm / count - s / count * m / count
  const scale = c / vm
  if (!(scale > 0)) return Infinity
  return Math.sqrt(Math.max(0, vs - c * scale) / vm) / scale
}

/** Cross spectrum of stack and model over the model's power, in rings about 0.2 and 0.3 of the cut-off. */
function transferOf(stack: Float32Array, width: number, margin: number, w: number, h: number, model: Float32Array, fc: number, at: readonly number[]): number[] {
  const n = 256
  const cut = n / 2 - 1
  const forward = createForward(n, cut)
  const load = (get: (x: number, y: number) => number) => {
    const window = new Float32Array(n * n)
    const ww = Math.min(n, w)
    const hh = Math.min(n, h)
    let mean = 0
    for (let y = 0; y < hh; y++) for (let x = 0; x < ww; x++) mean += get(x, y)
    mean /= ww * hh
    for (let y = 0; y < hh; y++) {
      const wy = 0.5 - 0.5 * Math.cos(2 * Math.PI * (y + 0.5) / hh)
      for (let x = 0; x < ww; x++) window[y * n + x] = (get(x, y) - mean) * wy * (0.5 - 0.5 * Math.cos(2 * Math.PI * (x + 0.5) / ww))
    }
    const out = new Float64Array(spectrumLength(cut))
    forward.forward(window, out)
    return out
  }
  const a = load((x, y) => stack[(y + margin) * width + x + margin]!)
  const b = load((x, y) => model[y * w + x]!)
  const ring = (low: number, high: number): number => {
    let cross = 0
    let power = 0
    for (let kx = 0, o = 0; kx <= cut; kx++) {
      for (let ky = -cut; ky <= cut; ky++, o += 2) {
        const f = Math.hypot(kx, ky) / n
        if (f < low * fc || f >= high * fc) continue
        cross += a[o]! * b[o]! + a[o + 1]! * b[o + 1]!
        power += b[o]! * b[o]! + b[o + 1]! * b[o + 1]!
      }
    }
    return cross / power
  }
  const whole = ring(0.005, 0.05)
  return at.map(u => ring(u - 0.02, u + 0.02) / whole)
}
