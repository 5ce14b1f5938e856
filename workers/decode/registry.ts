/** Every decoder, in the order in which a file is offered to them. */
import type { CaptureFormat } from '../../shared/schemas/capture'
import { openFits } from './fits/reader'
import { openPng } from './png/reader'
import type { OpenOne } from './sequence'
import { openSer, readSerHeader, serAgrees } from './ser'
import { tiffLayout } from './tiff/directory'
import { openTiff } from './tiff/reader'

export interface Decoder {
  format: CaptureFormat
  /** With its article, as it stands in a sentence. */
  label: string
  extensions: string[]
  /** Whether the first bytes (up to 512) and the size are those of this format. */
  recognise(head: Uint8Array, size: number): boolean
  /** Whether a file that is only named so is offered all the same, because there is no signature to go by. */
  recogniseDamaged?: boolean
  open: OpenOne
}

const startsWith = (head: Uint8Array, ...bytes: number[]) => bytes.every((byte, i) => head[i] === byte)

export const decoders: Decoder[] = [
  {
    format: 'fits', label: 'a FITS file', extensions: ['fits', 'fit', 'fts'],
    // "SIMPLE  ="
    recognise: head => startsWith(head, 0x53, 0x49, 0x4d, 0x50, 0x4c, 0x45, 0x20, 0x20, 0x3d),
    open: openFits,
  },
  {
    format: 'tiff', label: 'a TIFF file', extensions: ['tif', 'tiff'],
    recognise: head => tiffLayout(head) !== null,
    open: openTiff,
  },
  {
    format: 'png', label: 'a PNG file', extensions: ['png'],
    recognise: head => startsWith(head, 0x89, 0x50, 0x4e, 0x47, 0x0d, 0x0a, 0x1a, 0x0a),
    open: openPng,
  },
  {
    format: 'ser', label: 'a SER file', extensions: ['ser'],
    recognise(head, size) {
      const header = readSerHeader(head)
      return header !== null && serAgrees(header, size)
    },
    recogniseDamaged: true,
    open: openSer,
  },
]
