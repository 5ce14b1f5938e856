/**
 * What the bench asks of the imaging core, over one worker boundary. Implemented by
 * workers/bench.worker.ts (captures) and workers/guest.worker.ts (filed runs, from the ladder file);
 * used through composables/useCore.ts, the only module that touches comlink.
 */
import type { DriftCalibration } from './measure/drift/types'
import type { CaptureFacts, CaptureOverrides, TargetKind } from '../shared/schemas/capture'
import type { Evidence } from '../shared/schemas/evidence'
import type { Recipe, ScoreMeasure } from '../shared/schemas/recipe'
import type { RestoreMethod, RestorePlan } from '../shared/schemas/restoration'
import type { MeasureRequest, MeasureResult } from '../shared/schemas/measure'
import type { ColourShifts, DisplayStretch, FieldFigures, LadderInfo, Provenance, RunResult, SetAsideReason, StackFigures } from '../shared/schemas/run'

/** A capture to open: files picked by the user (one file, or the files of a folder in any order), or a demo. */
export type CaptureInput =
  | { kind: 'files', name: string, files: File[] }
  | { kind: 'url', name: string, urls: { url: string, name: string, sizeBytes: number }[] }
  | { kind: 'demo', scene: 'double' | 'triple' | 'planet' | 'terrain' }

/** A bad capture, as plain data (an Error does not cross the boundary whole). */
export interface CaptureProblem {
  code: 'empty' | 'truncated' | 'no-frames' | 'absurd-size' | 'unsupported-depth' | 'unsupported-compression'
    | 'wrong-extension' | 'unknown-format' | 'mixed-sizes' | 'damaged' | 'unreadable' | 'too-large'
  /** What is wrong and what to do, for the user. */
  message: string
}

export type OpenAnswer = { ok: true, facts: CaptureFacts, resumable: boolean } | { ok: false, problem: CaptureProblem }

export type Pass = 'open' | 'survey' | 'grade' | 'refine' | 'patches' | 'ladder' | 'proofs'

/** Progress of a pass; at most ten a second. */
export interface PassProgress { pass: Pass, round: number, done: number, total: number, framesPerSecond: number, secondsLeft: number | null }

/** The frame table in columns, growing while grade runs. Index = frame number from 0. NaN where not known. */
export interface FrameColumns {
  count: number
  /** Score that ranks (by the recipe's measure); larger is sharper. */
  score: Float64Array
  laplacian: Float64Array
  peak: Float64Array
  /** Place of the target, px, and the shift that moves the frame onto the reference. */
  x: Float64Array
  y: Float64Array
  dx: Float64Array
  dy: Float64Array
  /** 1 is best; 0 where set aside. */
  rank: Int32Array
  /** 0 ranked; otherwise 1 + index in setAsideReasons. */
  setAside: Uint8Array
  /** Seconds since the first frame, or frame number × median interval, or null. */
  seconds: Float64Array | null
}

/** Stage results as they come. Arrays are copies that the receiver owns. */
export type RunEvent =
  | { kind: 'progress', progress: PassProgress }
  | { kind: 'surveyed', target: TargetKind, chosen: { rankBy?: ScoreMeasure, blurPx: number, windowPx: number, centre: { x: number, y: number }, kind?: TargetKind }, noise: number, noSignal: boolean, preview: StackImage }
  | { kind: 'frames', columns: FrameColumns, complete: boolean }
  | { kind: 'preview', image: StackImage }
  | { kind: 'ranked', ranked: number, setAside: Partial<Record<SetAsideReason, number>> }
  /** What the patches of an extended target say about its air. */
  | { kind: 'field', figures: FieldFigures }
  | { kind: 'ladder', ladder: LadderInfo }
  | { kind: 'proof', fraction: number | 'average', image: StackImage, figures: StackFigures }
  /** A pass that was computed (not taken from memory or the browser's store). Times in ms since the Unix epoch. */
  | { kind: 'timing', pass: Pass, startedAt: number, ms: number }
  | { kind: 'done', provenance: Provenance }

/** A stack ready for the canvas and for reading values. `samples` planar, row-major, planes × height × width. */
export interface StackImage {
  width: number, height: number, planes: 1 | 3
  samples: Float32Array
  /** Frames in it. */
  count: number
  restored: boolean
  /** Colour stacks: what was added to the places of red and blue to lay them on green, px; null where a plane was left alone. */
  colours?: ColourShifts
  /** Where the recipe restores: what was done, and the figures of the guards. */
  restoration?: RestorationReport
}

/** Whole px within an image. */
export interface Part { x: number, y: number, width: number, height: number }

/** What a restoration did and what it cost; see workers/restore/guards.ts for the overshoot's figures. */
export interface RestorationReport {
  method: RestoreMethod
  /** Why nothing is restored, for the user; empty otherwise. */
  reason: string
  /** Wavelets: gain of each scale, finest first (of the green plane). */
  gains: number[]
  /** Richardson-Lucy: rounds made. */
  rounds: number
  /** Noise of the restored stack over that of the stack, from halves; null where there are none. */
  noiseGain: number | null
  /** Extended targets: Strehl ratio of the stack and D/r0 of the air, as measured. */
  strehl: number | null
  apertureOverR0: number | null
  overshoot: { under: number, over: number, rimBright: number | null, rimDark: number | null }
}

export interface Optics { apertureMm: number, focalLengthMm: number, pixelSizeUm: number, obstruction: number, wavelengthNm: number }

/** Bytes of one export, ready to save or to file. */
export interface ExportFile { role: string, name: string, type: string, bytes: Uint8Array }

export type ExportKind = 'stack-fits' | 'average-fits' | 'stack-tiff16' | 'stack-png16' | 'view-png8' | 'frames-csv' | 'recipe-json' | 'facts-json' | 'ladder-fits' | 'proofs-png' | 'thumbnail-png'

export interface CoreApi {
  open(input: CaptureInput, overrides: CaptureOverrides): Promise<OpenAnswer>
  /** Runs whatever stages the recipe needs that are not there yet. Resolves when all are done or the run was cancelled. */
  run(recipe: Recipe, optics: Optics | null, onEvent: (event: RunEvent) => void): Promise<{ cancelled: boolean }>
  /** Stops the running pass within 100 ms; what was computed is kept. */
  cancel(): Promise<void>
  /**
   * The stack of exactly the best `count` frames, restored if the recipe says so and `restored` is asked.
   * With `dragging` it may be the stack of the nearest rung, where the exact one would have to read the file:
   * show the image's own `count`, and ask again without `dragging` on release. A newer call ends an older
   * one that is not finished; the older one then rejects with an AbortError.
   * With `part` only that part of the picture needs to be restored (the rest may be as it was): a large picture is
   * asked for by its visible part first, then whole.
   */
  stack(count: number, restored: boolean, dragging?: boolean, part?: Part | null): Promise<StackImage>
  /** Figures of a stack of `count` frames. */
  figures(count: number): Promise<StackFigures>
  /** What the recipe's restoration comes to for the best `count` frames; filed with a run. */
  restorePlan(count: number): Promise<RestorePlan>
  /** How the air blurs the star on the bench: its transfer over the telescope's own; null where it cannot be measured. */
  starTransfer(count: number): Promise<{ step: number, values: number[] } | null>
  /** The keep curve of the last run, from independent halves; computed when first asked for. */
  evidence(): Promise<Evidence>
  /** One decoded frame (luminance as judged), for looking at a single exposure. */
  frame(index: number): Promise<StackImage>
  /** Files for saving or filing; `stretch` is used by the 8-bit views. */
  export(kinds: ExportKind[], context: { recipe: Recipe, stretch: DisplayStretch, fraction: number, targetName: string, observer: string, recipeName: string | null }): Promise<ExportFile[]>
  /** Measures a double or multiple star on the unrestored stack; see shared/schemas/measure.ts. A newer call ends an older one. */
  measure(request: MeasureRequest): Promise<MeasureResult>
  /** Scale and orientation from the open capture, taken with the drive off. An answer with words where it cannot be used. */
  drift(declinationDeg: number, onProgress: (done: number, total: number) => void): Promise<DriftAnswer>
  close(): Promise<void>
}

export type { DriftCalibration }
export type DriftAnswer = { ok: true, drift: DriftCalibration } | { ok: false, message: string }

/** A filed run to look at without its capture: the ladder file by HTTP ranges and the frame table. */
export interface FiledRun {
  ladderUrl: string, ladderBytes: number, framesUrl: string, averageUrl: string | null, result: RunResult
  /** The filed stack; with it the filed count is a stop of the slider even where the ladder has no such rung. */
  stackUrl?: string | null
}

/** What a guest's bench asks; implemented by workers/guest.worker.ts. Counts snap to rungs, so that the count shown is what is in the image. */
export interface GuestApi {
  /** The counts that can be shown (the rungs, and the filed one), ascending, and the frame table. */
  open(run: FiledRun): Promise<{ counts: number[], columns: FrameColumns }>
  /** The stack of the rung nearest to `count`; its `count` says which. */
  stack(count: number, restored: boolean): Promise<StackImage>
  figures(count: number): Promise<StackFigures>
  /** The plain unregistered average; null where the run holds none. */
  average(): Promise<StackImage | null>
  close(): Promise<void>
  alive(): Promise<boolean>
}

/** What the worker exposes besides: an answer that only a worker that is not stuck can give. */
export interface WorkerApi extends CoreApi { alive(): Promise<boolean> }
