/** Every decoder, in the order in which a file is offered to them. */
import type { CaptureFormat } from '../../shared/schemas/capture'
import { openAvi } from './avi/reader'
import { openFits } from './fits/reader'
import { openJpeg } from './jpeg/reader'
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
    format: 'jpeg', label: 'a JPEG file', extensions: ['jpg', 'jpeg'],
    recognise: head => startsWith(head, 0xff, 0xd8, 0xff),
    open: openJpeg,
  },
  {
    format: 'avi', label: 'an AVI file', extensions: ['avi'],
    // "RIFF", a size, "AVI "
    recognise: head => startsWith(head, 0x52, 0x49, 0x46, 0x46) && startsWith(head.subarray(8), 0x41, 0x56, 0x49, 0x20),
    open: openAvi,
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
