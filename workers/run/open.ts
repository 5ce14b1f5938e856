import type { CaptureInput } from '../api'
import { CaptureError, type FrameReader } from '../decode/types'
import { demoScene, rehearsalReader } from '../rehearse/index'
import type { CaptureOverrides } from '../../shared/schemas/capture'

/** A reader for whatever the bench was given. Throws CaptureError. */
export async function openInput(input: CaptureInput, _overrides: CaptureOverrides): Promise<FrameReader> {
  switch (input.kind) {
    case 'demo': return await rehearsalReader(demoScene(input.scene))
    default: throw new CaptureError('unknown-format', 'Files cannot be opened by this build yet. Try a demo capture.')
  }
}
