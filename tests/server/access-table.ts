/**
 * Who gets which answer from which route. A new route gets its rows in a file under access/ and is listed here;
 * access.test.ts fails for a route of the build that has none.
 */
import { accountRows } from './access/accounts'
import { archiveRows } from './access/archive'
import type { AccessRow } from './access/row'

export const accessTable: AccessRow[] = [...accountRows, ...archiveRows]
