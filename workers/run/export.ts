import type { CoreApi, ExportFile, ExportKind } from '../api'
import type { Engine } from './engine'

export type ExportContext = Parameters<CoreApi['export']>[1]

/** Files of a finished run, in the order asked. */
export async function exportFiles(_engine: Engine, kinds: ExportKind[], _context: ExportContext): Promise<ExportFile[]> {
  throw new Error(`This build cannot write ${kinds.join(', ')} yet.`)
}
