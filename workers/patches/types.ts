/**
 * Field patches: parts of an extended target that are registered and ranked by themselves, because the air differs over the field.
 *
 * place.ts      where patches lie: on structure that stands out of the noise, or where the user put them
 * registrar.ts  local shifts and local transfer of detail of one frame
 * settle.ts     what the patches say together: how far the air differs, and the best estimate at every tile
 * mesh.ts       tiles of the stack: a partition of unity; each tile has its own shifts and its own ranking
 * tiles.ts      adds the tiles of one frame to sums; how many frames cover each pixel
 */
export interface Place { x: number, y: number }

/** Tiles of the stack's grid in rows and columns; their weights overlap and sum to 1. Plain data. */
export interface Mesh { width: number, height: number, columns: number, rows: number }

export interface PatchPlan {
  width: number
  height: number
  /** Middles of the patches on the stack's grid, px. */
  places: Place[]
  windowPx: number
  /** How far from the frame's global shift a patch may lie, px. */
  reachPx: number
  noise: number
  reference: Float32Array
}

/** Local results of frames: frames × places, row-major. Shifts are beyond the frame's own, px; NaN where a patch was not sure. */
export interface PatchTable { count: number, dx: Float32Array, dy: Float32Array, transfer: Float32Array }

/** Everything that stacking in tiles needs. Arrays are frames × tiles, row-major. */
export interface Field {
  mesh: Mesh
  places: Place[]
  windowPx: number
  /** Root mean square of what the air moves parts of the field against each other, px (both axes together), and its standard error. */
  differsPx: number
  differsErrPx: number
  /** Distance over which it stays alike, px. */
  alikePx: number
  /** Local shifts beyond the frame's own. */
  dx: Float32Array
  dy: Float32Array
  /** Local transfer over the frame's own; multiplies its score. */
  quality: Float32Array
}
