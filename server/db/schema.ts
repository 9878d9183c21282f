/**
 * The database, in MariaDB through Drizzle. Ids are opaque UUIDs made by the program; times are UTC.
 * Rows that processes fight over (jobs, uploads) are changed by single compare-and-set statements only.
 */
import { bigint, boolean, customType, datetime, double, index, int, mysqlTable, primaryKey, text, uniqueIndex, varchar } from 'drizzle-orm/mysql-core'
import type { AlignmentEvidence, CodeRange, Flag, Group, LampPatch, PlanLine, Transfer } from '../../shared/measurement'
import type { Role } from '../../shared/permissions'
import type { FrameSetState, JobState, PipelineStage, Stage, UploadState } from '../../shared/states'
import type { CheckResult } from '../../shared/checks'
import type { ChannelMapping } from '../../shared/records'
import type { FrameSetReview } from '../../shared/frameSetReview'
import type { EventType } from '../../shared/events'

/** MariaDB's JSON is LONGTEXT: the driver hands back a string, so parse it here. */
const json = <T>(name: string) => customType<{ data: T, driverData: string }>({
  dataType: () => 'longtext',
  toDriver: value => JSON.stringify(value),
  fromDriver: value => (typeof value === 'string' ? JSON.parse(value) : value) as T,
})(name)

const id = () => varchar('id', { length: 36 }).primaryKey()
const ref = (name: string) => varchar(name, { length: 36 })
const at = (name: string) => datetime(name, { mode: 'date', fsp: 3 })
const sha256 = (name = 'sha256') => varchar(name, { length: 64 })

// ── people ──────────────────────────────────────────────────────────────────────────────────────────────
export const users = mysqlTable('users', {
  id: id(),
  email: varchar('email', { length: 254 }).notNull(),
  name: varchar('name', { length: 120 }).notNull(),
  role: varchar('role', { length: 16 }).$type<Role>().notNull(),
  passwordHash: varchar('password_hash', { length: 255 }),
  /** Demo accounts can sign in only while demo mode is on. */
  demo: boolean('demo').notNull().default(false),
  disabledAt: at('disabled_at'),
  createdAt: at('created_at').notNull(),
}, t => [uniqueIndex('users_email').on(t.email)])

/** The session cookie is stateless; it counts only while its row here is alive. The id is a hash of the cookie's secret. */
export const sessions = mysqlTable('sessions', {
  id: sha256('id').primaryKey(),
  userId: ref('user_id').notNull().references(() => users.id),
  createdAt: at('created_at').notNull(),
  lastSeenAt: at('last_seen_at').notNull(),
  expiresAt: at('expires_at').notNull(),
  userAgent: varchar('user_agent', { length: 255 }),
}, t => [index('sessions_user').on(t.userId)])

/** One-time links sent by e-mail: invitation or password reset. Only the token's hash is kept. */
export const accountLinks = mysqlTable('account_links', {
  tokenHash: sha256('token_hash').primaryKey(),
  kind: varchar('kind', { length: 16 }).$type<'invitation' | 'reset'>().notNull(),
  userId: ref('user_id').notNull().references(() => users.id),
  createdAt: at('created_at').notNull(),
  expiresAt: at('expires_at').notNull(),
  usedAt: at('used_at'),
}, t => [index('account_links_user').on(t.userId)])

export const apiTokens = mysqlTable('api_tokens', {
  id: id(),
  userId: ref('user_id').notNull().references(() => users.id),
  name: varchar('name', { length: 120 }).notNull(),
  tokenHash: sha256('token_hash').notNull(),
  createdAt: at('created_at').notNull(),
  lastUsedAt: at('last_used_at'),
  revokedAt: at('revoked_at'),
}, t => [uniqueIndex('api_tokens_hash').on(t.tokenHash), index('api_tokens_user').on(t.userId)])

export const auditEntries = mysqlTable('audit_entries', {
  id: bigint('id', { mode: 'number' }).primaryKey().autoincrement(),
  userId: ref('user_id').references(() => users.id),
  action: varchar('action', { length: 64 }).notNull(),
  subject: varchar('subject', { length: 120 }),
  details: json<Record<string, unknown>>('details'),
  createdAt: at('created_at').notNull(),
})

// ── campaigns and acquisitions ──────────────────────────────────────────────────────────────────────────
export const campaigns = mysqlTable('campaigns', {
  id: id(),
  name: varchar('name', { length: 160 }).notNull(),
  specimen: varchar('specimen', { length: 240 }),
  notes: text('notes'),
  createdBy: ref('created_by').notNull().references(() => users.id),
  createdAt: at('created_at').notNull(),
  updatedAt: at('updated_at').notNull(),
}, t => [index('campaigns_created').on(t.createdAt, t.id)])

export const campaignGuests = mysqlTable('campaign_guests', {
  campaignId: ref('campaign_id').notNull().references(() => campaigns.id),
  userId: ref('user_id').notNull().references(() => users.id),
  grantedBy: ref('granted_by').notNull().references(() => users.id),
  createdAt: at('created_at').notNull(),
}, t => [primaryKey({ columns: [t.campaignId, t.userId] })])

export const cameraProfiles = mysqlTable('camera_profiles', {
  id: id(),
  name: varchar('name', { length: 120 }).notNull(),
  frameRateHz: double('frame_rate_hz'),
  frameExposureSeconds: double('frame_exposure_seconds'),
  transfer: varchar('transfer', { length: 16 }).$type<Transfer>().notNull(),
  range: varchar('code_range', { length: 16 }).$type<CodeRange>().notNull(),
  millimetresPerPixel: double('millimetres_per_pixel'),
  createdAt: at('created_at').notNull(),
})

export const acquisitions = mysqlTable('acquisitions', {
  id: id(),
  /** Short number people use when they talk: "acquisition 14". */
  number: int('number').notNull(),
  campaignId: ref('campaign_id').notNull().references(() => campaigns.id),
  title: varchar('title', { length: 160 }).notNull(),
  notes: text('notes'),
  cameraProfileId: ref('camera_profile_id').references(() => cameraProfiles.id),
  /** Null: one over the clip's frame rate. */
  frameExposureSeconds: double('frame_exposure_seconds'),
  transfer: varchar('transfer', { length: 16 }).$type<Transfer>().notNull(),
  range: varchar('code_range', { length: 16 }).$type<CodeRange>().notNull(),
  millimetresPerPixel: double('millimetres_per_pixel'),
  guardSeconds: double('guard_seconds').notNull(),
  plan: json<PlanLine[]>('plan').notNull(),
  autoRun: boolean('auto_run').notNull(),
  lampPatch: json<LampPatch | null>('lamp_patch'),
  /** A person asked for the stages to run; with autoRun they run without being asked. */
  runRequestedAt: at('run_requested_at'),
  channels: json<ChannelMapping | null>('channels'),
  createdBy: ref('created_by').notNull().references(() => users.id),
  createdAt: at('created_at').notNull(),
  updatedAt: at('updated_at').notNull(),
}, t => [uniqueIndex('acquisitions_number').on(t.number), index('acquisitions_campaign').on(t.campaignId, t.number), index('acquisitions_created').on(t.createdAt, t.id)])

/** A clip part or a record, from the first byte to proven. The row outlives the tus client's memory of it. */
export const uploads = mysqlTable('uploads', {
  id: id(),
  acquisitionId: ref('acquisition_id').notNull().references(() => acquisitions.id),
  userId: ref('user_id').notNull().references(() => users.id),
  kind: varchar('kind', { length: 8 }).$type<'clip' | 'record'>().notNull(),
  part: int('part').notNull(),
  filename: varchar('filename', { length: 255 }).notNull(),
  filetype: varchar('filetype', { length: 120 }),
  bytes: bigint('bytes', { mode: 'number' }).notNull(),
  receivedBytes: bigint('received_bytes', { mode: 'number' }).notNull(),
  state: varchar('state', { length: 16 }).$type<UploadState>().notNull(),
  sha256: sha256(),
  /** Key in the file store once stored. */
  fileKey: varchar('file_key', { length: 255 }),
  message: text('message'),
  createdAt: at('created_at').notNull(),
  lastActivityAt: at('last_activity_at').notNull(),
  storedAt: at('stored_at'),
}, t => [index('uploads_acquisition').on(t.acquisitionId, t.kind, t.part), index('uploads_state').on(t.state, t.lastActivityAt)])

// ── the pipeline ────────────────────────────────────────────────────────────────────────────────────────
export const jobs = mysqlTable('jobs', {
  id: id(),
  stage: varchar('stage', { length: 16 }).$type<Stage>().notNull(),
  acquisitionId: ref('acquisition_id').notNull().references(() => acquisitions.id),
  /** The upload that a verify job proves. */
  uploadId: ref('upload_id').references(() => uploads.id),
  state: varchar('state', { length: 16 }).$type<JobState>().notNull(),
  /** acquisition:stage while the job is active, so that a stage is never queued twice; else null. */
  activeKey: varchar('active_key', { length: 96 }),
  /** What the stage reads, as a hash: the output counts only while its inputs are still these. */
  inputsKey: sha256('inputs_key'),
  /** Smaller runs first. */
  priority: int('priority').notNull(),
  /** Claim order within a priority. */
  queuedAt: at('queued_at').notNull(),
  notBefore: at('not_before').notNull(),
  /** Counts claims. It fences every write of an attempt: an attempt that lost its lease changes nothing. */
  attempts: int('attempts').notNull(),
  crashes: int('crashes').notNull(),
  runnerId: ref('runner_id'),
  leaseUntil: at('lease_until'),
  cancelRequested: varchar('cancel_requested', { length: 8 }).$type<'cancel' | 'hold'>(),
  progress: double('progress').notNull(),
  framesPerSecond: double('frames_per_second'),
  etaSeconds: double('eta_seconds'),
  message: text('message'),
  errorCode: varchar('error_code', { length: 64 }),
  log: text('log'),
  createdAt: at('created_at').notNull(),
  startedAt: at('started_at'),
  finishedAt: at('finished_at'),
}, t => [
  uniqueIndex('jobs_active').on(t.activeKey),
  // Serves the claim's ORDER BY: without it SKIP LOCKED locks every candidate and starves the second runner.
  index('jobs_claim').on(t.state, t.priority, t.queuedAt, t.id),
  index('jobs_lease').on(t.state, t.leaseUntil),
  index('jobs_acquisition').on(t.acquisitionId, t.stage, t.createdAt),
  index('jobs_created').on(t.createdAt, t.id),
])

/** The accepted output of a stage on an acquisition; stale as soon as its inputs' key is another. */
export const stageOutputs = mysqlTable('stage_outputs', {
  acquisitionId: ref('acquisition_id').notNull().references(() => acquisitions.id),
  stage: varchar('stage', { length: 16 }).$type<PipelineStage>().notNull(),
  jobId: ref('job_id'),
  inputsKey: sha256('inputs_key').notNull(),
  /** Names this output for the stages that read it: changes whenever the output does. */
  outputKey: sha256('output_key').notNull(),
  /** Small facts; see shared/stageOutputs.ts for the shape of each stage. */
  facts: json<Record<string, unknown>>('facts').notNull(),
  /** Files this stage left in the store: name → key. */
  files: json<Record<string, string>>('files').notNull(),
  flags: json<Flag[]>('flags').notNull(),
  createdAt: at('created_at').notNull(),
}, t => [primaryKey({ columns: [t.acquisitionId, t.stage] })])

export const alignments = mysqlTable('alignments', {
  acquisitionId: ref('acquisition_id').notNull().references(() => acquisitions.id),
  version: int('version').notNull(),
  offsetSeconds: double('offset_seconds').notNull(),
  driftPpm: double('drift_ppm').notNull(),
  /** Null until the align stage has judged a manual alignment. */
  residual: double('residual'),
  confidence: double('confidence'),
  method: varchar('method', { length: 16 }).$type<'light' | 'manual'>().notNull(),
  evidence: json<AlignmentEvidence | null>('evidence'),
  accepted: boolean('accepted').notNull(),
  authorId: ref('author_id').references(() => users.id),
  createdAt: at('created_at').notNull(),
}, t => [primaryKey({ columns: [t.acquisitionId, t.version] })])

export const cutLists = mysqlTable('cut_lists', {
  acquisitionId: ref('acquisition_id').notNull().references(() => acquisitions.id),
  version: int('version').notNull(),
  alignmentVersion: int('alignment_version').notNull(),
  groups: json<Group[]>('cut_groups').notNull(),
  authorId: ref('author_id').references(() => users.id),
  createdAt: at('created_at').notNull(),
}, t => [primaryKey({ columns: [t.acquisitionId, t.version] })])

export const frameSets = mysqlTable('frame_sets', {
  id: id(),
  acquisitionId: ref('acquisition_id').notNull().references(() => acquisitions.id),
  line: int('line').notNull(),
  frequencyHz: double('frequency_hz').notNull(),
  state: varchar('state', { length: 16 }).$type<FrameSetState>().notNull(),
  cutListVersion: int('cut_list_version').notNull(),
  checks: json<CheckResult[]>('checks').notNull(),
  groups: json<Group[]>('set_groups').notNull(),
  /** What went into it, and who decided what; null on sets from before this was kept. */
  review: json<FrameSetReview>('review'),
  width: int('width').notNull(),
  height: int('height').notNull(),
  /** Set when a newer run has taken its place; kept so that a link in a report still resolves. */
  supersededAt: at('superseded_at'),
  releasedBy: ref('released_by').references(() => users.id),
  releasedAt: at('released_at'),
  releaseNote: text('release_note'),
  createdAt: at('created_at').notNull(),
}, t => [index('frame_sets_acquisition').on(t.acquisitionId, t.line), index('frame_sets_created').on(t.createdAt, t.id)])

export const frameSetFiles = mysqlTable('frame_set_files', {
  frameSetId: ref('frame_set_id').notNull().references(() => frameSets.id),
  name: varchar('name', { length: 120 }).notNull(),
  bytes: bigint('bytes', { mode: 'number' }).notNull(),
  sha256: sha256().notNull(),
  contentType: varchar('content_type', { length: 80 }).notNull(),
  fileKey: varchar('file_key', { length: 255 }).notNull(),
}, t => [primaryKey({ columns: [t.frameSetId, t.name] })])

export const runners = mysqlTable('runners', {
  id: id(),
  name: varchar('name', { length: 80 }).notNull(),
  host: varchar('host', { length: 120 }).notNull(),
  pid: int('pid').notNull(),
  cores: int('cores').notNull(),
  slots: int('slots').notNull(),
  version: varchar('version', { length: 40 }).notNull(),
  startedAt: at('started_at').notNull(),
  beatAt: at('beat_at').notNull(),
  stoppedAt: at('stopped_at'),
})

// ── live events ─────────────────────────────────────────────────────────────────────────────────────────
/** One row. Its lock is held from numbering an event to the commit, so ids appear in order and a reader misses none. */
export const eventCounter = mysqlTable('event_counter', {
  id: int('id').primaryKey(),
  value: bigint('value', { mode: 'number' }).notNull(),
})

export const events = mysqlTable('events', {
  id: bigint('id', { mode: 'number' }).primaryKey(),
  type: varchar('type', { length: 16 }).$type<EventType>().notNull(),
  campaignId: ref('campaign_id'),
  payload: json<Record<string, unknown>>('payload').notNull(),
  createdAt: at('created_at').notNull(),
}, t => [index('events_created').on(t.createdAt)])

export const settings = mysqlTable('settings', {
  name: varchar('name', { length: 64 }).primaryKey(),
  value: json<unknown>('value').notNull(),
})
