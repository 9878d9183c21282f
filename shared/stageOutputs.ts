/** What each stage leaves in `stage_outputs.facts` and which files it names; read by later stages, pages and manifests. */
import type { AlignmentEvidence, ClipFacts } from './measurement'
import type { RecordFacts } from './records'
import type { PipelineStage } from './states'

/** The stored upload that a stage read. */
export interface SourceFile {
  uploadId: string
  fileKey: string
  filename: string
  bytes: number
  sha256: string
}

export interface StageFacts {
  /** files: `frame-times` (NPY float64, clip seconds). */
  inspect: { source: SourceFile, clip: ClipFacts }
  /** files: `meter` (NPZ: light float64, clipped float64, black float64, difference float64; one value a frame). */
  meter: { frameCount: number, exposureSeconds: number, meanLight: number }
  /** files: one per channel role, raw little-endian float32. */
  record: { source: SourceFile, record: RecordFacts, darkLevel: number | null }
  /** files: `predicted` (NPY float64, predicted light of each frame in the unit of `meter.light`; NaN outside the record). */
  align: { version: number, offsetSeconds: number, driftPpm: number, evidence: AlignmentEvidence | null }
  cut: { version: number, alignmentVersion: number, lines: { line: number, frequencyHz: number, groups: number }[] }
  /** files: `sum-<group id>`, raw little-endian uint32 [H,W]. */
  sum: { cutListVersion: number, frameCount: number }
  check: { frameSetIds: string[] }
}

export type FactsOf<S extends PipelineStage> = StageFacts[S]
