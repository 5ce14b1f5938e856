/** Files a worked run through the API, from whatever state an earlier, interrupted seeding left it in. */
import { createHash } from 'node:crypto'
import type { AnnounceBody, RunDetail, RunPage, RunSummary } from '../../shared/api/archive'
import type { FileRole } from '../../shared/schemas/run'
import type { Member } from './member'
import type { WorkedRun } from './work'

/** What tells one run of the demo from the others. */
export interface RunIdentity { target: string, night: string, recipeVersionId: string, recipeName: string, version: number }

export async function findFiled(owner: Member, identity: RunIdentity): Promise<RunSummary | null> {
  const page = await owner.call<RunPage>('GET', `/api/runs?member=${owner.id}&state=filed&pageSize=100&from=${identity.night}&to=${identity.night}`)
  return page.items.find(run => run.owner.id === owner.id && run.target.name === identity.target && run.night === identity.night
    && run.recipe?.name === identity.recipeName && run.recipe.version === identity.version) ?? null
}

interface FiledFile { role: FileRole, name: string, bytes: Uint8Array, sha256: string }

function described(role: string, name: string, bytes: Uint8Array): FiledFile {
  return { role: role as FileRole, name, bytes, sha256: createHash('sha256').update(bytes).digest('hex') }
}

export async function fileRun(
  owner: Member, identity: RunIdentity, worked: WorkedRun, options: { instrumentId: string, replacesRunId: string | null, note: string, raw: { name: string, bytes: Uint8Array } | null },
): Promise<RunDetail> {
  const files = worked.files.map(file => described(file.role, file.name, file.bytes))
  if (options.raw) files.push(described('raw', options.raw.name, options.raw.bytes))
  // The server knows a run that was announced before: what has arrived of it stays.
  const run = await announced(owner, identity, worked, files, options)
  for (const file of run.files) {
    if (file.state === 'received') continue
    const local = files.find(({ role, sha256 }) => role === file.role && sha256 === file.sha256)!
    await owner.upload(file.id, local.bytes)
  }
  return owner.call<RunDetail>('POST', `/api/runs/${run.id}/file`, {})
}

function announced(owner: Member, identity: RunIdentity, worked: WorkedRun, files: FiledFile[], options: { instrumentId: string, replacesRunId: string | null, note: string }): Promise<RunDetail> {
  const body: AnnounceBody = {
    targetName: identity.target, instrumentId: options.instrumentId, recipeVersionId: identity.recipeVersionId, replacesRunId: options.replacesRunId,
    night: identity.night, note: options.note, result: worked.result,
    files: files.map(({ role, name, bytes, sha256 }) => ({ role, name, sizeBytes: bytes.length, sha256 })),
  }
  return owner.call<RunDetail>('POST', '/api/runs', body)
}
