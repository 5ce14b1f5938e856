/** Captures on disk with a known truth beside them. */
import { readFile, readdir } from 'node:fs/promises'
import path from 'node:path'
import type { Optics } from '../../workers/api'
import { skyToPixels } from '../../workers/rehearse/scene'
import { openCapture } from '../../workers/decode/index'
import type { FrameReader } from '../../workers/decode/types'
import { captureSources } from '../lib/file-source'

/** Figures that another pipeline reached on a capture, by the key of the row; see judge.ts. */
export type References = Record<string, number>

export interface KnownCapture {
  name: string
  scene: 'stars' | 'planet' | 'terrain'
  open(): Promise<FrameReader>
  strehl: number[]
  /** Offsets of the stars from the first one, px, and magnitudes fainter; null for extended scenes. */
  stars: { dx: number, dy: number, deltaMag: number }[] | null
  /** Place of the first star, or of the scene's middle, by the brightest point of the point-spread function, px. */
  peakX: number[]
  peakY: number[]
  /** The same by the wavefront's tilt; null where not known. */
  tiltX: number[] | null
  tiltY: number[] | null
  optics: Optics
  references: References
  referenceSource: string
  /** Object before any blur, planes × height × width, for extended targets. */
  sceneImage: { planes: Float32Array[], width: number, height: number, /** Seen through the perfect telescope already. */ blurred?: boolean } | null
  wavelengthsNm: number[]
}

interface TruthFile {
  D: number
  lam: number
  obs?: number
  scale: number
  scene: string
  file: string
  frames: number
  origin_xy: [number, number]
  colours?: number[]
  stars?: { sep_arcsec: number, pa_deg: number, dmag: number }[]
  up_pa_deg?: number
  per_frame: Record<'strehl' | 'drift_x' | 'drift_y' | 'psf_peak_x' | 'psf_peak_y', number[]> & { ztilt_x?: number[], ztilt_y?: number[] }
}

/** Every capture of a folder that has a truth, in order of name. */
export async function* sampleTruths(dir: string): AsyncGenerator<KnownCapture> {
  const names = (await readdir(dir)).filter(name => name.endsWith('.truth.json')).sort()
  if (names.length === 0) throw new Error(`There is no *.truth.json in ${dir}.`)
  let references: Record<string, References> = {}
  let source = ''
  try {
    const given = JSON.parse(await readFile(path.join(dir, 'reference.json'), 'utf8')) as { source: string, figures: Record<string, References> }
    references = given.figures
    source = given.source
  }
  catch {
    const known = await import('./published')
    references = known.publishedFigures
    source = known.publishedSource
  }
  for (const name of names) {
    const stem = name.slice(0, -'.truth.json'.length)
    const truth = JSON.parse(await readFile(path.join(dir, name), 'utf8')) as TruthFile
    const place = path.join(dir, truth.file)
    const { per_frame: p, origin_xy: [ox, oy] } = truth
    const add = (a: number[], b: number[] | undefined, origin: number) => (b ? a.map((v, i) => v + b[i]! + origin) : null)
    yield {
      name: stem,
      scene: truth.scene as KnownCapture['scene'],
      async open() {
        const { name: capture, sources } = await captureSources(place)
        return openCapture(capture, sources)
      },
      strehl: p.strehl,
      stars: truth.stars ? truth.stars.map(({ sep_arcsec, pa_deg, dmag }) => ({ ...skyToPixels(sep_arcsec, pa_deg, truth.up_pa_deg ?? 0, truth.scale), deltaMag: dmag })) : null,
      peakX: add(p.drift_x, p.psf_peak_x, ox)!,
      peakY: add(p.drift_y, p.psf_peak_y, oy)!,
      tiltX: add(p.drift_x, p.ztilt_x, ox),
      tiltY: add(p.drift_y, p.ztilt_y, oy),
      // Only the scale counts: a pixel of 1 µm and the focal length that gives it.
      optics: { apertureMm: truth.D * 1000, focalLengthMm: 206.264806 / truth.scale, pixelSizeUm: 1, obstruction: truth.obs ?? 0, wavelengthNm: truth.lam * 1e9 },
      references: references[stem] ?? {},
      referenceSource: source,
      sceneImage: truth.scene === 'stars' ? null : await readScene(path.join(dir, `${stem}.scene.fits`)),
      wavelengthsNm: truth.colours ? truth.colours.map(v => v * 1e9) : [truth.lam * 1e9],
    }
  }
}

/** The scene as FITS floats, planes in order, first row on top; null where there is no such file. */
async function readScene(file: string): Promise<KnownCapture['sceneImage']> {
  try {
    const { name, sources } = await captureSources(file)
    const reader = await openCapture(name, sources)
    const { width, height, frameCount, planes } = reader.facts
    const { samples } = await reader.readFrames(0, frameCount)
    const size = width * height
    const list = Array.from({ length: frameCount * planes }, (_, k) => Float32Array.from(samples.subarray(k * size, (k + 1) * size)))
    reader.close()
    return { planes: list, width, height }
  }
  catch {
    return null
  }
}
