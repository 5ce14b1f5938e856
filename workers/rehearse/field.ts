/**
 * Air that differs over the field: point-spread functions are made for the nodes of a grid over the frame, and the image is the
 * sum of what each node's would make of the whole scene, weighted by a hat over the node. Nodes are so close that the air of
 * neighbours is nearly the same: a fraction of the aperture apart at the highest layer.
 */
import { ARCSEC_PER_RADIAN } from '../../shared/optics'
import { pixelScaleArcsec, type RehearsalSpec } from './spec'

export interface FieldNode {
  /** Angle from the middle of the frame, rad. */
  towards: { x: number, y: number }
  /** Weight of the node along each axis; the weights of all nodes sum to 1 at every pixel. */
  across: Float64Array
  down: Float64Array
}

/** Apertures between neighbours at the highest layer. */
const SPACING = 0.35
/** Nodes on an axis at most; odd, so that there is one in the middle. */
const MOST = 13

/** The nodes, row by row; the middle one is the middle of the frame. A single one where all air is at the telescope. */
export function fieldNodes(spec: RehearsalSpec): FieldNode[] {
  const highest = Math.max(0, ...spec.air.layers.map(layer => layer.heightM ?? 0))
  const radians = pixelScaleArcsec(spec.optics) / ARCSEC_PER_RADIAN
  const axis = (length: number) => {
    const wanted = length * radians * highest / (spec.optics.apertureMm / 1000) / SPACING
    const count = highest === 0 ? 1 : Math.min(MOST, 2 * Math.ceil(wanted / 2) + 1)
    const step = count > 1 ? (length - 1) / (count - 1) : 1
    return Array.from({ length: count }, (_, k) => ({
      angle: count > 1 ? (k * step - (length - 1) / 2) * radians : 0,
      weights: Float64Array.from({ length }, (_, x) => (count > 1 ? Math.max(0, 1 - Math.abs(x / step - k)) : 1)),
    }))
  }
  const columns = axis(spec.width)
  return axis(spec.height).flatMap(row => columns.map(column => ({ towards: { x: column.angle, y: row.angle }, across: column.weights, down: row.weights })))
}
