/** An invented banded planet: a slightly flattened ball with cloud belts, spots and limb darkening. */
import type { Scene } from './spec'
import { createFractal, smoothStep, type Drawing } from './texture'
import { createRandom } from './random'

/** Polar over equatorial diameter. */
const FLATNESS = 0.94
/** Limb darkening: brightness ∝ μ^k (Minnaert's law seen from the Sun), weaker in red than in blue; invented values. */
const LIMB = [0.78, 0.86, 0.95] as const
const ZONE = [0.98, 0.92, 0.80] as const
const BELT = [0.74, 0.58, 0.44] as const
const POLE = [0.66, 0.66, 0.64] as const

interface Spot { longitude: number, latitude: number, width: number, height: number, colour: readonly [number, number, number], strength: number }

export function drawPlanet(scene: Extract<Scene, { kind: 'planet' }>, size: number, scaleArcsec: number, upDeg: number): Drawing {
  const random = createRandom(scene.seed, 20)
  const swirl = createFractal(scene.seed, 21, 8, 5, 0.62)
  const belts = Array.from({ length: 7 }, (_, i) => ({
    latitude: -0.95 + 0.31 * i + 0.07 * (random.uniform() - 0.5), width: 0.05 + 0.07 * random.uniform(), depth: 0.35 + 0.65 * random.uniform(),
  }))
  // The two main belts, one on each side of the equator.
  belts.push({ latitude: 0.24, width: 0.10, depth: 1 }, { latitude: -0.27, width: 0.12, depth: 0.9 })
  const spots: Spot[] = [
    { longitude: 0.36, latitude: 0.47, width: 0.15, height: 0.07, colour: [0.60, 0.50, 0.46], strength: 0.85 },
    { longitude: 0.36, latitude: 0.47, width: 0.08, height: 0.035, colour: [0.92, 0.86, 0.76], strength: 0.8 },
    { longitude: -0.52, latitude: 0.26, width: 0.10, height: 0.03, colour: [0.44, 0.34, 0.29], strength: 0.85 },
    { longitude: -0.16, latitude: 0.235, width: 0.06, height: 0.028, colour: [0.48, 0.37, 0.31], strength: 0.7 },
    { longitude: 0.12, latitude: -0.27, width: 0.13, height: 0.04, colour: [1, 0.94, 0.82], strength: 0.65 },
    { longitude: -0.35, latitude: -0.57, width: 0.07, height: 0.045, colour: [1, 0.98, 0.92], strength: 0.8 },
    { longitude: 0.62, latitude: -0.60, width: 0.06, height: 0.04, colour: [1, 0.98, 0.92], strength: 0.7 },
  ]
  const radius = scene.diameterArcsec / scaleArcsec / 2
  // Unit vector of the planet's north pole on the screen (y down); position angle from screen up through left.
  const turn = (scene.poleDeg - upDeg) * Math.PI / 180
  const cosTurn = Math.cos(turn)
  const sinTurn = Math.sin(turn)
  const cosTilt = Math.cos(scene.tiltDeg * Math.PI / 180)
  const sinTilt = Math.sin(scene.tiltDeg * Math.PI / 180)

  /** Adds the colour seen at (right, up) in radii, `right` and `up` in the planet's own frame. */
  const shade = (right: number, up: number, out: Float64Array) => {
    const squashed = up / FLATNESS
    const squared = right * right + squashed * squashed
    if (squared >= 1) return
    const towards = Math.sqrt(1 - squared)
    const north = squashed * cosTilt + towards * sinTilt
    const front = towards * cosTilt - squashed * sinTilt
    const latitude = Math.asin(Math.max(-1, Math.min(1, north)))
    const longitude = Math.atan2(right, front)
    const u = longitude / (2 * Math.PI) + 0.5
    // Festoons: the belts' edges wander, and more so finely along the flow than across it.
    const wander = swirl(u * 1.0, latitude * 0.55 + 0.5)
    const fine = swirl(u * 2 + 0.37 + 0.05 * wander, latitude * 1.6 + 0.11)
    const wavy = latitude + 0.05 * wander + 0.022 * fine
    let belt = 0
    for (const { latitude: middle, width, depth } of belts) {
      const away = Math.abs(wavy - middle) / width
      belt = Math.max(belt, depth * (1 - smoothStep(0.6, 1.35, away)))
    }
    belt = Math.max(0, Math.min(1, belt * (0.9 + 0.5 * fine) + 0.16 * fine + 0.05))
    const pole = smoothStep(0.8, 1.25, Math.abs(latitude))
    const mu = towards
    for (let plane = 0; plane < 3; plane++) {
      let value = ZONE[plane]! * (1 - belt) + BELT[plane]! * belt
      value = value * (1 - 0.7 * pole) + POLE[plane]! * 0.7 * pole
      for (const spot of spots) {
        const dx = (longitude - spot.longitude) * Math.cos(latitude) / spot.width
        const dy = (latitude - spot.latitude) / spot.height
        const inside = spot.strength * (1 - smoothStep(0.55, 1.15, Math.sqrt(dx * dx + dy * dy)))
        value = value * (1 - inside) + spot.colour[plane]! * inside
      }
      out[plane]! += value * mu ** LIMB[plane]!
    }
  }

  const parts = 3
  const planes = [0, 1, 2].map(() => new Float64Array(size * size))
  const sum = new Float64Array(3)
  for (let row = 0; row < size; row++) {
    for (let column = 0; column < size; column++) {
      const away = Math.hypot(column - size / 2, row - size / 2)
      if (away > radius + 1) continue
      sum.fill(0)
      for (let j = 0; j < parts; j++) {
        for (let i = 0; i < parts; i++) {
          const x = (column - size / 2 + (i + 0.5) / parts - 0.5) / radius
          const y = (row - size / 2 + (j + 0.5) / parts - 0.5) / radius
          // North on the screen is (−sin turn, −cos turn); east, the planet's left, is a quarter turn further.
          shade(x * cosTurn - y * sinTurn, -x * sinTurn - y * cosTurn, sum)
        }
      }
      for (let plane = 0; plane < 3; plane++) planes[plane]![row * size + column] = sum[plane]! / (parts * parts)
    }
  }
  return { planes }
}
