import type { CaptureInput } from '../api'
import { openCapture } from '../decode/index'
import type { FrameReader } from '../decode/types'
import { demoScene, rehearsalReader } from '../rehearse/index'
import { blobSource } from '../source/blob'
import { httpSource } from '../source/http'
import type { CaptureOverrides } from '../../shared/schemas/capture'

/** A reader for whatever the bench was given. Throws CaptureError. */
export function openInput(input: CaptureInput, overrides: CaptureOverrides): Promise<FrameReader> {
  switch (input.kind) {
    case 'files': return openCapture(input.name, input.files.map(file => blobSource(file, file.webkitRelativePath || file.name)), overrides)
    case 'url': return openCapture(input.name, input.urls.map(({ url, name, sizeBytes }) => httpSource(url, name, sizeBytes)), overrides)
    case 'demo': return rehearsalReader(demoScene(input.scene))
  }
}
