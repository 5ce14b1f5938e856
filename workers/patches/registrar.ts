/** Local shifts of one frame: the patches' windows against the reference, each around the frame's own shift. */
import { extendedRegistrar, extendedWorkspace } from '../register/extended'
import { emptyShift } from '../register/registrar'
import type { PatchPlan } from './types'

export interface PatchRegistrar {
  /** Writes one value per place at `offset`; shifts beyond (dx, dy), NaN where a patch is not sure or beyond its reach. */
  register(luminance: Float32Array, dx: number, dy: number, out: { dx: Float32Array, dy: Float32Array, transfer: Float32Array }, offset: number): void
}

export function createPatchRegistrar({ width, height, places, windowPx, reachPx, noise, reference }: PatchPlan): PatchRegistrar {
  const shared = { width, height, method: 'correlation' as const, form: 'field' as const, windowPx, blurPx: 1, noise, reference, reachPx }
  const workspace = extendedWorkspace(windowPx)
  const patches = places.map(({ x, y }) => extendedRegistrar({ ...shared, refX: x, refY: y }, workspace))
  const shift = emptyShift()
  return {
    register(luminance, dx, dy, out, offset) {
      patches.forEach((patch, p) => {
        const x = places[p]!.x - dx
        const y = places[p]!.y - dy
        out.dx[offset + p] = out.dy[offset + p] = out.transfer[offset + p] = NaN
        // Less than half of the window lies in the frame: nothing to go by.
        if (x < 0 || y < 0 || x > width - 1 || y > height - 1) return
        patch.register(luminance, x, y, shift)
        const offX = shift.dx - dx
        const offY = shift.dy - dy
        if (!shift.sure || Math.abs(offX) >= reachPx || Math.abs(offY) >= reachPx) return
        out.dx[offset + p] = offX
        out.dy[offset + p] = offY
        out.transfer[offset + p] = shift.transfer
      })
    },
  }
}
