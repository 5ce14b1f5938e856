/** An invented cratered patch under slanting light: a height map, its slopes towards the light, and its cast shadows. */
import type { Scene } from './spec'
import { createFractal, smoothStep, type Drawing } from './texture'
import { createRandom } from './random'

/** Central peaks: place in crater radii, height in crater depths. */
const PEAKS = [[-0.04, 0.03, 0.5], [0.11, -0.09, 0.32], [-0.02, -0.17, 0.2]] as const

/** Adds a crater to the height map, which repeats at its edges. Heights and radius in px. */
function dig(height: Float64Array, size: number, x: number, y: number, radius: number, depth: number, large: boolean, ragged: (angle: number) => number): void {
  const reach = Math.ceil(2.6 * radius)
  // The ground that it fell on: mean height around the place.
  let ground = 0
  for (let turn = 0; turn < 8; turn++) {
    const column = Math.round(x + 0.9 * radius * Math.cos(turn * Math.PI / 4))
    const row = Math.round(y + 0.9 * radius * Math.sin(turn * Math.PI / 4))
    ground += height[(row & (size - 1)) * size + (column & (size - 1))]! / 8
  }
  for (let j = -reach; j <= reach; j++) {
    for (let i = -reach; i <= reach; i++) {
      const column = Math.floor(x) + i
      const row = Math.floor(y) + j
      const dx = column - x
      const dy = row - y
      const r = Math.hypot(dx, dy) / (radius * (1 + 0.07 * ragged(Math.atan2(dy, dx))))
      if (r > 2.5) continue
      const at = ((row + size) & (size - 1)) * size + ((column + size) & (size - 1))
      // A bowl, or for the large ones a flat floor and slumped walls; a raised rim; debris falling off outside.
      const floor = large ? 0.6 : 0.1
      const rim = large ? 0.22 : 0.18
      let value: number
      if (r < 1) {
        const wall = Math.max(0, (r - floor) / (1 - floor))
        const slump = large ? 0.07 * Math.sin(2 * Math.PI * Math.min(1, wall)) * Math.sin(5 * Math.atan2(dy, dx) + x) : 0
        value = -1 + (1 + rim) * (wall * wall * (3 - 2 * wall) + slump)
        // A group of peaks in the middle.
        if (large) for (const [px, py, strength] of PEAKS) value += strength * Math.exp(-(((dx / radius - px) / 0.1) ** 2) - (((dy / radius - py) / 0.1) ** 2))
      }
      else value = rim * (r ** -3) * (1 - smoothStep(1.8, 2.5, r))
      // Inside, the crater replaces what was there; outside it lies on top.
      const cover = 1 - smoothStep(0.85, 1.15, r)
      height[at] = height[at]! - (height[at]! - ground) * 0.8 * cover + depth * value
    }
  }
}

export function drawTerrain(scene: Extract<Scene, { kind: 'terrain' }>, size: number, upDeg: number): Drawing {
  const random = createRandom(scene.seed, 40)
  const relief = createFractal(scene.seed, 41, 4, 7, 0.5)
  const soil = createFractal(scene.seed, 51, 4, 6, 0.6)
  const height = new Float64Array(size * size)
  for (let row = 0, at = 0; row < size; row++) {
    for (let column = 0; column < size; column++, at++) height[at] = 0.03 * size * relief(column / size, row / size)
  }

  // Numbers fall with the square of the radius, as on worn ground; the oldest and largest come first.
  const largest = size * 0.17
  const smallest = 1.3
  const craters: { x: number, y: number, radius: number }[] = [
    { x: 0.44 * size, y: 0.53 * size, radius: largest }, { x: 0.62 * size, y: 0.39 * size, radius: largest * 0.55 },
    { x: 0.34 * size, y: 0.36 * size, radius: largest * 0.42 },
  ]
  const count = Math.round(0.011 * size * size / (smallest * smallest))
  for (let i = 0; i < count; i++) {
    const radius = Math.min(largest * 0.4, smallest / Math.sqrt(1 - random.uniform() * 0.9985))
    const x = size * random.uniform()
    const y = size * random.uniform()
    // The three named first are young: nothing large fell into them since.
    const young = craters.slice(0, 3).some(named => Math.hypot(x - named.x, y - named.y) < named.radius * 1.15)
    if (!young || (radius < 0.012 * size && random.uniform() < 0.3)) craters.push({ x, y, radius })
  }
  craters.sort((a, b) => b.radius - a.radius)
  for (const { x, y, radius } of craters) {
    const turns = [2, 3, 5, 7].map(times => ({ times, phase: 2 * Math.PI * random.uniform(), gain: random.normal() / Math.sqrt(times) }))
    // Old craters are worn down; few are fresh.
    const fresh = Math.min(1, radius / 3) * (0.35 + 0.65 * random.uniform() ** 2)
    const large = radius > 0.06 * size
    dig(height, size, x, y, radius, radius * (large ? 0.17 : 0.36 * fresh), large, angle => turns.reduce((sum, { times, phase, gain }) => sum + gain * Math.cos(times * angle + phase), 0))
  }

  // Towards the light on the screen: position angle from up through left.
  const turn = (scene.sunAzimuthDeg - upDeg) * Math.PI / 180
  const lightX = -Math.sin(turn)
  const lightY = -Math.cos(turn)
  const climb = Math.tan(scene.sunAltitudeDeg * Math.PI / 180)
  const cosAltitude = Math.cos(scene.sunAltitudeDeg * Math.PI / 180)
  const sinAltitude = Math.sin(scene.sunAltitudeDeg * Math.PI / 180)
  let top = -Infinity
  for (const value of height) top = Math.max(top, value)
  const mask = size - 1
  const at = (x: number, y: number) => {
    const column = Math.floor(x)
    const row = Math.floor(y)
    const u = x - column
    const v = y - row
    const get = (i: number, j: number) => height[((row + j) & mask) * size + ((column + i) & mask)]!
    return (get(0, 0) * (1 - u) + get(1, 0) * u) * (1 - v) + (get(0, 1) * (1 - u) + get(1, 1) * u) * v
  }

  const plane = new Float64Array(size * size)
  for (let row = 0, index = 0; row < size; row++) {
    for (let column = 0; column < size; column++, index++) {
      const here = height[index]!
      const slopeX = (at(column + 1, row) - at(column - 1, row)) / 2
      const slopeY = (at(column, row + 1) - at(column, row - 1)) / 2
      const norm = Math.sqrt(1 + slopeX * slopeX + slopeY * slopeY)
      const incidence = Math.max(0, (sinAltitude - cosAltitude * (slopeX * lightX + slopeY * lightY)) / norm)
      // Dusty ground: Lommel-Seeliger's law, brightness ∝ μ0/(μ0 + μ), seen from above.
      const emission = 1 / norm
      let light = incidence / (incidence + emission)
      // Cast shadow, soft over the Sun's half degree and what the grid blurs.
      let clear = 1
      for (let step = 1; step < size / 2; step += 1) {
        const ray = here + step * climb
        if (ray > top) break
        const over = at(column + step * lightX, row + step * lightY) - ray
        clear = Math.min(clear, 1 - smoothStep(-0.15 - 0.004 * step, 0.15 + 0.004 * step, over))
        if (clear <= 0) break
      }
      light *= clear
      const albedo = 0.8 + 0.28 * soil(column / size, row / size)
      plane[index] = albedo * (light + 0.006)
    }
  }
  // The brightest thousandth is white.
  const white = Float64Array.from(plane).sort()[Math.floor(0.999 * plane.length)]!
  for (let i = 0; i < plane.length; i++) plane[i] = Math.min(1.2, plane[i]! / white)
  return { planes: [plane] }
}
