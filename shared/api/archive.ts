/** Requests and answers of the archive: runs, files, links, reviews, recipes. */
import { z } from 'zod'
import { recipeSchema, type Recipe } from '../schemas/recipe'
import { fileRoles, reviewStates, runResultSchema, type FileRole, type ReviewState, type RunResult, type RunState } from '../schemas/run'
import { targetKinds, type TargetKind } from '../schemas/capture'
import { idSchema, type Page } from './account'

const isDay = (text: string) => {
  const time = Date.parse(`${text}T00:00:00Z`)
  return !Number.isNaN(time) && new Date(time).toISOString().slice(0, 10) === text
}
export const nightSchema = z.string().regex(/^\d{4}-\d{2}-\d{2}$/).refine(isDay, 'This day is not in the calendar.')
const sha256Schema = z.string().regex(/^[0-9a-f]{64}$/)
const noteSchema = z.string().trim().max(4000)

// ---- instruments and targets -------------------------------------------------------------------
export const instrumentBody = z.object({
  name: z.string().trim().min(1).max(120),
  apertureMm: z.number().positive().max(100_000),
  focalLengthMm: z.number().positive().max(1_000_000),
  obstruction: z.number().min(0).max(0.9),
  pixelSizeUm: z.number().positive().max(1000),
  filter: z.string().trim().max(100),
  /** Effective wavelength, nm. */
  wavelengthNm: z.number().min(200).max(30_000),
})
export type InstrumentBody = z.infer<typeof instrumentBody>
export interface Instrument extends InstrumentBody { id: string, ownerId: string, ownerName: string, mine: boolean }

export const targetBody = z.object({ name: z.string().trim().min(1).max(120), kind: z.enum(targetKinds), note: noteSchema.default('') })
export interface Target { id: string, name: string, kind: TargetKind, note: string, runs: number }

// ---- filing ------------------------------------------------------------------------------------
export const announceBody = z.object({
  /** Target by name: an existing one of the club (same name, any case) or a new one. */
  targetName: z.string().trim().min(1).max(120),
  instrumentId: idSchema.nullable().default(null),
  recipeVersionId: idSchema.nullable().default(null),
  replacesRunId: idSchema.nullable().default(null),
  night: nightSchema,
  note: noteSchema.default(''),
  result: runResultSchema,
  files: z.array(z.object({
    role: z.enum(fileRoles),
    name: z.string().min(1).max(255),
    sizeBytes: z.number().int().positive(),
    sha256: sha256Schema,
  })).min(1).max(200),
})
export type AnnounceBody = z.input<typeof announceBody>

/** State of an announced file: announced → received (bytes there, hash checked, in the store), or refused. */
export interface RunFile {
  id: string, role: FileRole, name: string, sizeBytes: number, sha256: string, type: string
  state: 'announced' | 'received' | 'refused'
  /** Why it was refused, for the user. */
  problem: string | null
  /** Where to download it once the run is filed; relative, works for the asker (member or guest). */
  url: string
  /** Where an upload of it has begun and can go on, for its owner while the run is not filed; null otherwise. */
  uploadUrl: string | null
}

export interface PersonRef { id: string, name: string }
export interface RunSummary {
  id: string, state: RunState, target: { id: string, name: string, kind: TargetKind }, owner: PersonRef
  instrument: { id: string, name: string } | null
  night: string, filedAt: string | null, createdAt: string, deletedAt: string | null
  recipe: { id: string, name: string, version: number, forked: boolean } | null
  keep: { fraction: number, count: number }, frames: number
  fwhmPx: number | null, fwhmErrPx: number | null, scaleArcsecPerPx: number | null
  review: ReviewState, thumbnailUrl: string | null, replacesRunId: string | null
  /** The newest filed run that was made to replace this one. */
  replacedByRunId: string | null
}

/** What the asker may do with this run: computed by the server, so that a screen never guesses. */
export interface RunRights { edit: boolean, remove: boolean, restore: boolean, share: boolean, askReview: boolean, remark: boolean, judge: boolean, answer: boolean, download: boolean }

export interface RunDetail extends RunSummary {
  note: string, result: RunResult, files: RunFile[], rights: RunRights
  pins: Pin[], remarks: Remark[], proposals: Proposal[], reviews: Review[]
  history: { at: string, actor: string, action: string, detail: string }[]
  /** Set for a guest of a link. */
  link: { scope: LinkScope, expiresAt: string } | null
}

export const runQuery = z.object({
  search: z.string().trim().max(100).optional(),
  target: idSchema.optional(), member: idSchema.optional(), instrument: idSchema.optional(),
  from: nightSchema.optional(), to: nightSchema.optional(),
  kind: z.enum(targetKinds).optional(),
  review: z.enum(reviewStates).optional(),
  /** `filed` (default), `announced` (own, not complete) or `deleted` (own). */
  state: z.enum(['filed', 'announced', 'deleted']).default('filed'),
  sort: z.enum(['night', 'target', 'owner', 'keep', 'fwhm', 'filed', 'review']).default('filed'),
  order: z.enum(['asc', 'desc']).default('desc'),
  page: z.coerce.number().int().min(1).max(100_000).default(1),
  pageSize: z.coerce.number().int().min(1).max(100).default(25),
})
export type RunQuery = z.input<typeof runQuery>
export interface RunPage extends Page<RunSummary> { nights: number, waiting: number }
export const runPatchBody = z.object({ targetName: z.string().trim().min(1).max(120).optional(), note: noteSchema.optional(), instrumentId: idSchema.nullable().optional() })

// ---- links -------------------------------------------------------------------------------------
export const linkScopes = ['look', 'remark'] as const
export type LinkScope = typeof linkScopes[number]
export const linkBody = z.object({ scope: z.enum(linkScopes), days: z.number().int().min(1).max(365) })
/** `url` is only in the answer that made the link: the token is not stored. */
export interface ShareLink { id: string, scope: LinkScope, createdAt: string, expiresAt: string, withdrawnAt: string | null, lastUsedAt: string | null, url?: string }

// ---- review ------------------------------------------------------------------------------------
const coordinate = z.number().min(-0.5).max(100_000)
export const pinBody = z.object({ x: coordinate, y: coordinate, text: noteSchema.min(1), guestName: z.string().trim().min(1).max(100).optional() })
export const remarkBody = z.object({ pinId: idSchema.nullable().default(null), text: noteSchema.min(1), guestName: z.string().trim().min(1).max(100).optional() })
export const proposalBody = z.object({ recipe: recipeSchema, text: noteSchema.default('') })
export const askReviewBody = z.object({ text: noteSchema.default('') })
export const verdicts = ['accepted', 'another-pass'] as const
export type Verdict = typeof verdicts[number]
export const verdictBody = z.object({ verdict: z.enum(verdicts), text: noteSchema.default('') })

/** `author` is a member's name or the name a guest gave; `guest` says which. x, y in image px, pixel centres at integers. */
export interface Pin { id: string, number: number, x: number, y: number, author: string, guest: boolean, at: string, text: string }
export interface Remark { id: string, pinId: string | null, author: string, guest: boolean, at: string, text: string }
export interface Proposal { id: string, author: string, at: string, text: string, recipe: Recipe }
export interface Review { id: string, askedBy: string, askedAt: string, text: string, verdict: Verdict | null, verdictBy: string | null, verdictAt: string | null, verdictText: string }
/** GET /api/reviews?state=waiting|done&page= */
export interface ReviewItem { review: Review, run: RunSummary }

// ---- recipes -----------------------------------------------------------------------------------
export const recipeBody = z.object({ name: z.string().trim().min(1).max(120), description: noteSchema.default(''), shared: z.boolean().default(false), recipe: recipeSchema })
export const recipePatchBody = z.object({ name: z.string().trim().min(1).max(120).optional(), description: noteSchema.optional(), shared: z.boolean().optional() })
export const recipeVersionBody = z.object({ recipe: recipeSchema, note: noteSchema.default('') })
export const forkBody = z.object({ name: z.string().trim().min(1).max(120).optional(), versionId: idSchema.optional() })
export interface RecipeVersion { id: string, version: number, recipe: Recipe, recipeHash: string, note: string, createdAt: string, author: string }
export interface RecipeSummary {
  id: string, name: string, description: string, owner: PersonRef, mine: boolean, shared: boolean
  forkOf: { recipeId: string, name: string, version: number } | null
  latest: RecipeVersion, versions: number, runs: number, updatedAt: string
}
export interface RecipeDetail extends RecipeSummary { history: RecipeVersion[], forks: { id: string, name: string, owner: string }[] }
