/** Stacks as pictures: the same formula as the filed 8-bit view, and only the red channel in the red theme. */
import type { StackImage } from '~~/workers/api'
import type { MosaicPattern } from '~~/shared/schemas/capture'
import type { DisplayStretch } from '~~/shared/schemas/run'

/** Rec. 709 weights, as in the filter of app.vue. */
const LUMA = [0.2126, 0.7152, 0.0722] as const
const STEPS = 4096

/** 8-bit levels for values from black to white in equal steps: level = 255 ((v − black) / (white − black))^(1/gamma). */
function levels(gamma: number): Uint8ClampedArray {
  const table = new Uint8ClampedArray(STEPS + 1)
  for (let step = 0; step <= STEPS; step++) table[step] = Math.round(255 * (step / STEPS) ** (1 / gamma))
  return table
}

/** The stack, or a part of it, as RGBA. Values that are not finite are black. */
export function stackPixels(image: StackImage, stretch: DisplayStretch, redOnly: boolean, crop = { x: 0, y: 0, width: image.width, height: image.height }): ImageData {
  const { black, white, gamma } = stretch
  const table = levels(gamma)
  const scale = STEPS / (white > black ? white - black : 1)
  const area = image.width * image.height
  const data = new Uint8ClampedArray(crop.width * crop.height * 4)
  const level = (value: number) => {
    const step = (value - black) * scale
    return step > 0 ? table[step < STEPS ? step | 0 : STEPS]! : 0
  }
  let out = 0
  for (let y = crop.y; y < crop.y + crop.height; y++) {
    for (let x = crop.x; x < crop.x + crop.width; x++, out += 4) {
      const at = y * image.width + x
      const r = level(image.samples[at]!)
      const g = image.planes === 3 ? level(image.samples[area + at]!) : r
      const b = image.planes === 3 ? level(image.samples[2 * area + at]!) : r
      data[out] = redOnly ? LUMA[0] * r + LUMA[1] * g + LUMA[2] * b : r
      data[out + 1] = redOnly ? 0 : g
      data[out + 2] = redOnly ? 0 : b
      data[out + 3] = 255
    }
  }
  return new ImageData(data, crop.width, crop.height)
}

/** The same on a canvas of its own. */
export function paintStack(image: StackImage, stretch: DisplayStretch, redOnly: boolean): HTMLCanvasElement {
  const canvas = document.createElement('canvas')
  canvas.width = image.width
  canvas.height = image.height
  canvas.getContext('2d')!.putImageData(stackPixels(image, stretch, redOnly), 0, 0)
  return canvas
}

/** A mosaic as a colour picture of half the size, for looking at: each cell of four is one pixel, its two greens averaged. */
export function mosaicCells(image: StackImage, pattern: MosaicPattern): StackImage {
  if (pattern === 'none' || image.planes !== 1) return image
  const width = image.width >> 1
  const height = image.height >> 1
  const area = width * height
  const samples = new Float32Array(area * 3)
  const planeOf = { R: 0, G: 1, B: 2 } as const
  for (let y = 0; y < height; y++) {
    for (let x = 0; x < width; x++) {
      for (let cell = 0; cell < 4; cell++) {
        const plane = planeOf[pattern[cell] as 'R' | 'G' | 'B']
        const value = image.samples[(2 * y + (cell >> 1)) * image.width + 2 * x + (cell & 1)]!
        samples[plane * area + y * width + x]! += plane === 1 ? value / 2 : value
      }
    }
  }
  return { ...image, width, height, planes: 3, samples }
}

/** Colours of the theme as they stand now, for what is drawn on a canvas. */
export function themeColour(name: string, element: Element = document.documentElement): string {
  return getComputedStyle(element).getPropertyValue(`--${name}`).trim()
}
