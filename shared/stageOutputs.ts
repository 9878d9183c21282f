/** What each stage leaves in `stage_outputs.facts` and which files it names; read by later stages, pages and manifests. */
import type { AlignmentEvidence, ClipFacts, FrameLoss } from './measurement'
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
  /** files: `frame-times` (NPY float64, clip seconds), `frame-index` (where decoding can begin), `frame-bytes` (NPY float64, compressed size of each frame). */
  inspect: { source: SourceFile, clip: ClipFacts }
  /**
   * files: `glance` (NPZ: light, clipped, black, difference, float64, and patch where a lamp patch is set; one value a frame, NaN where not measured) and, once a
   * stage has decoded the whole clip, `light` (the same of every frame).
   */
  meter: { frameCount: number, glanced: number, meanLight: number }
  /** files: one per channel role, raw little-endian float32; its pyramid of extremes; `regimes` (JSON). */
  record: { source: SourceFile, record: RecordFacts, darkLevel: number | null }
  /**
   * files: `predicted` (NPY float64, predicted light of each frame in the unit of the meter's light; NaN outside the
   * record), `frame-times` (clip seconds, lost frames allowed for).
   */
  align: { version: number, offsetSeconds: number, driftPpm: number, evidence: AlignmentEvidence | null, from: 'glance' | 'all' | 'manual', losses: FrameLoss[] }
  /** files: `groups` (JSON). */
  cut: { version: number, manual: boolean, alignmentVersion: number, lines: { line: number, frequencyHz: number, groups: number }[] }
  /**
   * files: `sum-<group id>`, raw little-endian uint32 [H,W]; `groups`, `frame-times` and `predicted` as they are after the
   * alignment was made anew with every frame.
   */
  sum: {
    clipKey: string
    cutListVersion: number
    frameCount: number
    /** The alignment was made anew with every frame's light. */
    refined: boolean
    /** Output of the align stage that it started from. */
    alignKey: string
    alignment: { version: number, offsetSeconds: number, driftPpm: number, losses: FrameLoss[] }
    /** Of each sum: its frames, and SHA-256 and CRC-32 of its bytes. */
    spans: { id: string, firstFrame: number, frameCount: number, sha256: string, crc: number }[]
  }
  check: { frameSetIds: string[] }
}

/** Name of the file that holds a channel's pyramid (jobs/signal/envelope.ts). */
export const pyramidName = (role: string) => `${role}-pyramid`

export type FactsOf<S extends PipelineStage> = StageFacts[S]
