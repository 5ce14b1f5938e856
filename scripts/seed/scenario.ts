/**
 * The demo: an invented club with invented members, instruments, targets and captures. No person, place, make or star
 * in it is real. Nights count back from the day the club began.
 */
import type { z } from 'zod'
import type { InstrumentBody, targetBody } from '../../shared/api/archive'
import { demoPeople } from '../../shared/demo'
import { defaultRecipe, type Recipe } from '../../shared/schemas/recipe'
import { demoScenes, type RehearsalSpec } from '../../workers/rehearse/index'

/** The members, by their first names; their sign-ins stand in shared/demo.ts and are made by the server at its first start. */
export const people = { orla: demoPeople[0], matthis: demoPeople[1], ines: demoPeople[2], jorin: demoPeople[3] }
export type Person = keyof typeof people

const dune = demoScenes.double.optics
const harbour = demoScenes.triple.optics
const orchard = demoScenes.planet.optics

function instrument(name: string, optics: RehearsalSpec['optics'], filter: string): InstrumentBody {
  const { apertureMm, focalLengthMm, obstruction, pixelSizeUm, wavelengthNm } = optics
  return { name, apertureMm, focalLengthMm, obstruction, pixelSizeUm, wavelengthNm, filter }
}

export const instruments = {
  dune: { owner: 'ines', body: instrument('Dune hut 250 mm, f/22', dune, 'green, 550 nm') },
  harbour: { owner: 'jorin', body: instrument('Harbour 350 mm, f/15.4', harbour, 'green, 550 nm') },
  orchard: { owner: 'ines', body: instrument('Orchard 280 mm, f/15', orchard, 'colour mosaic') },
} satisfies Record<string, { owner: Person, body: InstrumentBody }>

export type InstrumentKey = keyof typeof instruments

export const targets: z.input<typeof targetBody>[] = [
  { name: 'Tern double', kind: 'star', note: 'A pair for every telescope of the club: 1.24″, the companion 0.9 magnitudes fainter. Invented.' },
  { name: 'Larch triple', kind: 'star', note: 'Two bright stars at 2.16″ and a faint third between them. Invented.' },
  { name: 'Saffron planet', kind: 'extended', note: 'A banded disc of 17″ with a pale oval in the north. Invented.' },
  { name: 'Quarry patch', kind: 'extended', note: 'A worn ring with a group of peaks, under a low sun. Invented.' },
]

const pairs: Recipe = { ...defaultRecipe, score: { rankBy: 'peak', blurPx: 1 }, register: { ...defaultRecipe.register, windowPx: 64 } }
const planets: Recipe = {
  ...defaultRecipe, score: { rankBy: 'transfer', blurPx: 1.5 }, register: { ...defaultRecipe.register, referenceFraction: 0.1 }, keep: { fraction: 0.5 },
  restore: { ...defaultRecipe.restore, method: 'nothing' },
}

/** Versions in order, each with what changed. A fork starts from the latest version of its origin. */
export const recipes = {
  pairs: {
    owner: 'matthis', name: 'Close pairs', shared: true, forkOf: null,
    description: 'For double stars from one to four arcseconds in ordinary air. Ranks by the peak: on a star it follows the Strehl ratio best.',
    versions: [
      { recipe: { ...pairs, keep: { fraction: 0.2 } }, note: '' },
      { recipe: { ...pairs, keep: { fraction: 0.1 } }, note: 'A tenth instead of a fifth: the halo of the brighter star no longer leans on its companion.' },
    ],
  },
  triples: {
    owner: 'jorin', name: 'Close triples, wide halo', shared: true, forkOf: 'pairs',
    description: 'From Close pairs, for a faint third star in the halo of two bright ones.',
    versions: [
      { recipe: { ...pairs, register: { ...pairs.register, referenceFraction: 0.02 }, keep: { fraction: 0.3 } }, note: 'A sharper reference; keeps more, because the third star is faint.' },
    ],
  },
  planets: {
    owner: 'ines', name: 'Banded planets, gently', shared: true, forkOf: null,
    description: 'For a planet through a colour mosaic. Ranks by how much of the reference’s detail a frame carries, so that grain does not choose the frames.',
    versions: [
      { recipe: planets, note: '' },
      { recipe: { ...planets, keep: { fraction: 0.2 }, restore: { ...planets.restore, method: 'wavelets' } }, note: 'Fewer frames, and detail restored with measured gains, after the review of the first try.' },
    ],
  },
} satisfies Record<string, {
  owner: Person, name: string, shared: boolean, forkOf: 'pairs' | null, description: string, versions: { recipe: Recipe, note: string }[]
}>

export type RecipeKey = keyof typeof recipes

interface Capture { spec: RehearsalSpec, file: string, observer: Person, nightsAgo: number, startUtc: string, instrument: InstrumentKey }

function air(spec: RehearsalSpec, apertureOverR0: number): RehearsalSpec['air'] {
  return { ...spec.air, apertureOverR0 }
}

/** Sizes are chosen so that everything is simulated and worked through in well under a minute. */
export const captures = {
  double1: { spec: { ...demoScenes.double, seed: 3101, frames: 900 }, file: 'tern-double-1.ser', observer: 'ines', nightsAgo: 16, startUtc: '20:41:07', instrument: 'dune' },
  triple1: { spec: { ...demoScenes.triple, seed: 3202, frames: 1000, cloud: { atS: 9, widthS: 1.4, depth: 0.5 } }, file: 'larch-triple-1.ser', observer: 'jorin', nightsAgo: 9, startUtc: '22:41:30', instrument: 'harbour' },
  planet1: { spec: { ...demoScenes.planet, seed: 3303, frames: 240 }, file: 'saffron-planet-1.ser', observer: 'ines', nightsAgo: 7, startUtc: '23:12:44', instrument: 'orchard' },
  terrain1: { spec: { ...demoScenes.terrain, seed: 3404, frames: 200 }, file: 'quarry-patch-1.ser', observer: 'jorin', nightsAgo: 4, startUtc: '19:05:12', instrument: 'orchard' },
  double2: { spec: { ...demoScenes.double, seed: 3505, frames: 600, air: air(demoScenes.double, 5.6) }, file: 'tern-double-2.ser', observer: 'matthis', nightsAgo: 2, startUtc: '21:20:03', instrument: 'dune' },
} satisfies Record<string, Capture>

export type CaptureKey = keyof typeof captures

export interface RunPlan {
  key: string, owner: Person, target: string, capture: CaptureKey, recipe: RecipeKey
  /** Which of the recipe's versions in this file, from 1; a fork has one more, its origin's, before them. */
  version: number
  note: string, replaces: string | null, fileRaw: boolean
}

/** In the order of filing. */
export const runs: RunPlan[] = [
  { key: 'first-double', owner: 'ines', target: 'Tern double', capture: 'double1', recipe: 'pairs', version: 2, replaces: null, fileRaw: false,
    note: 'Steady for the first half, then gusts off the sea. Matthis’s recipe as it is.' },
  { key: 'first-triple', owner: 'jorin', target: 'Larch triple', capture: 'triple1', recipe: 'triples', version: 1, replaces: null, fileRaw: false,
    note: 'A thin cloud went through at about nine seconds, and I nudged the mount once.' },
  { key: 'first-planet', owner: 'ines', target: 'Saffron planet', capture: 'planet1', recipe: 'planets', version: 1, replaces: null, fileRaw: false,
    note: 'First light of the colour camera. Half of the frames, nothing restored.' },
  { key: 'patch', owner: 'jorin', target: 'Quarry patch', capture: 'terrain1', recipe: 'planets', version: 1, replaces: null, fileRaw: false,
    note: 'Low sun on the walls. Ines’s planet recipe works here as well.' },
  { key: 'second-planet', owner: 'ines', target: 'Saffron planet', capture: 'planet1', recipe: 'planets', version: 2, replaces: 'first-planet', fileRaw: true,
    note: 'The same capture again with fewer frames and detail restored with measured gains, as Matthis asked. The raw capture is filed with it.' },
  { key: 'second-double', owner: 'matthis', target: 'Tern double', capture: 'double2', recipe: 'pairs', version: 2, replaces: null, fileRaw: false,
    note: 'Poorer air than Ines had; for comparison.' },
  { key: 'third-double', owner: 'jorin', target: 'Tern double', capture: 'double2', recipe: 'pairs', version: 1, replaces: null, fileRaw: false,
    note: 'Matthis’s capture with the older version of the recipe, to see what the keep fraction does.' },
]
