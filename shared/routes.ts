/**
 * Every route of the API in one table: who may call it, which campaign it belongs to, and the schemas that
 * validate what goes in. The server refuses what is not in it, the OpenAPI page is made from it, and the
 * permission test walks it.
 *
 * `scope` says whose campaign must be open to the caller: `campaign` reads params.id, `acquisition`, `job`,
 * `frameSet` look the campaign up from params.id. `none`: no campaign is involved or the handler filters its list.
 */
import type { z } from 'zod'
import type { Permission } from './permissions'
import * as common from './schemas/common'
import * as people from './schemas/people'
import * as campaigns from './schemas/campaigns'
import * as results from './schemas/results'
import { channelMappingSchema } from './records'

export type Scope = 'none' | 'campaign' | 'acquisition' | 'job' | 'frameSet'

export interface RouteSpec {
  /** `public`: no sign-in needed. */
  permission: Permission | 'public'
  scope: Scope
  summary: string
  query?: z.ZodType
  body?: z.ZodType
  response?: z.ZodType
  status?: number
  /** Answers bytes or a stream, not JSON. */
  raw?: string
}

const route = <T extends RouteSpec>(spec: T): T => spec
const { listOf, okSchema, createdSchema, listQuerySchema } = common

export const routes = {
  // people
  'POST /api/auth/sign-in': route({ permission: 'public', scope: 'none', summary: 'Sign in; answers the user and sets the session cookie', body: people.signInSchema, response: people.userSchema }),
  'POST /api/auth/sign-out': route({ permission: 'self', scope: 'none', summary: 'End this session', response: okSchema }),
  'GET /api/auth/me': route({ permission: 'self', scope: 'none', summary: 'Who is signed in', response: people.userSchema }),
  'POST /api/auth/request-reset': route({ permission: 'public', scope: 'none', summary: 'Send a link for a new password, if the e-mail is known', body: people.requestResetSchema, response: okSchema }),
  'GET /api/auth/link': route({ permission: 'public', scope: 'none', summary: 'What a link from an e-mail is for', query: people.linkInfoQuerySchema, response: people.linkInfoSchema }),
  'POST /api/auth/accept-link': route({ permission: 'public', scope: 'none', summary: 'Set the password of an invitation or a reset', body: people.acceptLinkSchema, response: okSchema }),
  'POST /api/tokens': route({ permission: 'self', scope: 'none', summary: 'Make an API token; it is shown once', body: people.tokenCreateSchema, response: people.tokenCreatedSchema, status: 201 }),
  'GET /api/tokens': route({ permission: 'self', scope: 'none', summary: 'Own API tokens', query: listQuerySchema, response: listOf(people.tokenSchema) }),
  'DELETE /api/tokens/:id': route({ permission: 'self', scope: 'none', summary: 'Revoke an own API token', response: okSchema }),
  'GET /api/people': route({ permission: 'people.manage', scope: 'none', summary: 'Everybody with an account', query: listQuerySchema, response: listOf(people.personSchema) }),
  'POST /api/people': route({ permission: 'people.manage', scope: 'none', summary: 'Invite somebody by e-mail', body: people.inviteSchema, response: createdSchema, status: 201 }),
  'PATCH /api/people/:id': route({ permission: 'people.manage', scope: 'none', summary: 'Change name or role, disable or enable', body: people.personPatchSchema, response: okSchema }),
  'POST /api/people/:id/invite': route({ permission: 'people.manage', scope: 'none', summary: 'Send the invitation (or a password link) again', response: okSchema }),
  'GET /api/mails': route({ permission: 'mail.read', scope: 'none', summary: 'Mails caught by the local sink (demo mode)', query: listQuerySchema, response: listOf(people.mailSchema) }),

  // campaigns
  'GET /api/campaigns': route({ permission: 'campaign.read', scope: 'none', summary: 'Campaigns open to the caller, newest first', query: campaigns.campaignListQuerySchema, response: listOf(campaigns.campaignSchema) }),
  'POST /api/campaigns': route({ permission: 'campaign.write', scope: 'none', summary: 'Start a campaign', body: campaigns.campaignCreateSchema, response: createdSchema, status: 201 }),
  'GET /api/campaigns/:id': route({ permission: 'campaign.read', scope: 'campaign', summary: 'One campaign with its coverage', response: campaigns.campaignSchema }),
  'PATCH /api/campaigns/:id': route({ permission: 'campaign.write', scope: 'campaign', summary: 'Change name, specimen or notes', body: campaigns.campaignPatchSchema, response: okSchema }),
  'GET /api/campaigns/:id/guests': route({ permission: 'campaign.access', scope: 'campaign', summary: 'Guests this campaign is open to, and guests it could be opened to', response: campaigns.guestListSchema }),
  'POST /api/campaigns/:id/guests': route({ permission: 'campaign.access', scope: 'campaign', summary: 'Open the campaign to a guest', body: campaigns.guestAccessSchema, response: okSchema, status: 201 }),
  'DELETE /api/campaigns/:id/guests/:userId': route({ permission: 'campaign.access', scope: 'campaign', summary: 'Close the campaign to a guest', response: okSchema }),
  'GET /api/camera-profiles': route({ permission: 'cameraProfile.read', scope: 'none', summary: 'Camera profiles', query: listQuerySchema, response: listOf(campaigns.cameraProfileSchema) }),
  'POST /api/camera-profiles': route({ permission: 'cameraProfile.write', scope: 'none', summary: 'Add a camera profile', body: campaigns.cameraProfileWriteSchema, response: createdSchema, status: 201 }),
  'PATCH /api/camera-profiles/:id': route({ permission: 'cameraProfile.write', scope: 'none', summary: 'Change a camera profile', body: campaigns.cameraProfileWriteSchema, response: okSchema }),

  // acquisitions
  'GET /api/acquisitions': route({ permission: 'acquisition.read', scope: 'none', summary: 'Acquisitions, newest first', query: campaigns.acquisitionListQuerySchema, response: listOf(campaigns.acquisitionSummarySchema) }),
  'POST /api/acquisitions': route({ permission: 'acquisition.write', scope: 'none', summary: 'Register an acquisition (404 for a campaign the caller may not see)', body: campaigns.acquisitionCreateSchema, response: createdSchema, status: 201 }),
  'GET /api/acquisitions/:id': route({ permission: 'acquisition.read', scope: 'acquisition', summary: 'One acquisition: state, flags, stages, clip, record, alignment', response: campaigns.acquisitionSchema }),
  'PATCH /api/acquisitions/:id': route({ permission: 'acquisition.write', scope: 'acquisition', summary: 'Change settings; stages that read them run again', body: campaigns.acquisitionPatchSchema, response: okSchema }),
  'PUT /api/acquisitions/:id/channels': route({ permission: 'acquisition.write', scope: 'acquisition', summary: 'Which column of the record is which channel', body: channelMappingSchema, response: okSchema }),
  'POST /api/acquisitions/:id/process': route({ permission: 'process.run', scope: 'acquisition', summary: 'Run the stages, from one on or where it stopped; 409 with what is missing', body: campaigns.processSchema, status: 202 }),
  'GET /api/acquisitions/:id/alignment': route({ permission: 'acquisition.read', scope: 'acquisition', summary: 'The newest alignment', response: campaigns.alignmentOutSchema }),
  'PUT /api/acquisitions/:id/alignment': route({ permission: 'alignment.write', scope: 'acquisition', summary: 'Accept an alignment; makes a new version and goes on', body: campaigns.alignmentPutSchema, response: campaigns.alignmentOutSchema }),
  'GET /api/acquisitions/:id/cut-list': route({ permission: 'acquisition.read', scope: 'acquisition', summary: 'The newest cut list', response: results.cutListSchema }),
  'PUT /api/acquisitions/:id/cut-list': route({ permission: 'cutList.write', scope: 'acquisition', summary: 'Store an edited cut list; makes a new version and sums again', body: results.cutListPutSchema, response: results.cutListSchema }),
  'GET /api/acquisitions/:id/light': route({ permission: 'acquisition.read', scope: 'acquisition', summary: 'Measured and predicted light of the frames', query: results.lightQuerySchema, response: results.lightSchema }),
  'GET /api/records/:id/channels/:name': route({ permission: 'acquisition.read', scope: 'acquisition', summary: 'Envelope of a channel; :id is the acquisition', query: results.channelQuerySchema, response: results.channelEnvelopeSchema }),

  // uploads (tus 1.0.0; the protocol's own answers)
  'POST /api/uploads': route({ permission: 'upload.write', scope: 'none', summary: 'tus creation', raw: 'application/offset+octet-stream' }),
  'OPTIONS /api/uploads': route({ permission: 'public', scope: 'none', summary: 'tus discovery', raw: 'text/plain' }),
  'GET /api/uploads': route({ permission: 'upload.read', scope: 'none', summary: 'Uploads that are not stored yet, newest first', query: listQuerySchema.extend({ acquisitionId: common.idSchema.optional() }), response: listOf(campaigns.uploadSchema) }),
  'HEAD /api/uploads/:id': route({ permission: 'upload.write', scope: 'none', summary: 'tus offset', raw: 'text/plain' }),
  'PATCH /api/uploads/:id': route({ permission: 'upload.write', scope: 'none', summary: 'tus bytes', raw: 'application/offset+octet-stream' }),
  'DELETE /api/uploads/:id': route({ permission: 'upload.write', scope: 'none', summary: 'tus termination', raw: 'text/plain' }),
  'OPTIONS /api/uploads/:id': route({ permission: 'public', scope: 'none', summary: 'tus discovery', raw: 'text/plain' }),

  // queue
  'GET /api/jobs': route({ permission: 'job.read', scope: 'none', summary: 'Jobs, newest first', query: results.jobListQuerySchema, response: listOf(results.jobSchema) }),
  'GET /api/jobs/:id': route({ permission: 'job.read', scope: 'job', summary: 'One job with its log', response: results.jobDetailSchema }),
  'PATCH /api/jobs/:id': route({ permission: 'job.control', scope: 'job', summary: 'Change the priority; smaller runs first', body: results.jobPatchSchema, response: okSchema }),
  'POST /api/jobs/:id/cancel': route({ permission: 'job.control', scope: 'job', summary: 'Cancel', response: okSchema }),
  'POST /api/jobs/:id/retry': route({ permission: 'job.control', scope: 'job', summary: 'Try again', response: okSchema }),
  'POST /api/jobs/:id/hold': route({ permission: 'job.control', scope: 'job', summary: 'Put on hold', response: okSchema }),
  'POST /api/jobs/:id/resume': route({ permission: 'job.control', scope: 'job', summary: 'Take off hold', response: okSchema }),
  'GET /api/queue': route({ permission: 'job.read', scope: 'none', summary: 'The queue at a glance', response: results.queueStatusSchema }),
  'POST /api/queue/pause': route({ permission: 'job.control', scope: 'none', summary: 'Start no more jobs', response: okSchema }),
  'POST /api/queue/resume': route({ permission: 'job.control', scope: 'none', summary: 'Start jobs again', response: okSchema }),
  'GET /api/runners': route({ permission: 'job.read', scope: 'none', summary: 'Runners and what they did lately', query: listQuerySchema, response: listOf(results.runnerSchema) }),

  // results
  'GET /api/frame-sets': route({ permission: 'frameSet.read', scope: 'none', summary: 'Frame sets; guests see released ones of their campaigns', query: results.frameSetListQuerySchema, response: listOf(results.frameSetSchema) }),
  'GET /api/frame-sets/:id': route({ permission: 'frameSet.read', scope: 'frameSet', summary: 'One frame set', response: results.frameSetSchema }),
  'GET /api/frame-sets/:id/files/:name': route({ permission: 'frameSet.read', scope: 'frameSet', summary: 'A file of the set; Range, If-None-Match, ETag, Repr-Digest', raw: 'application/octet-stream' }),
  'HEAD /api/frame-sets/:id/files/:name': route({ permission: 'frameSet.read', scope: 'frameSet', summary: 'Size and digest of a file', raw: 'application/octet-stream' }),
  'GET /api/frame-sets/:id/images/:name': route({ permission: 'frameSet.read', scope: 'frameSet', summary: 'One image as raw little-endian values, row-major; :name is scene, p, q, noise or a group id; X-Lampsum-Shape is rows,columns and X-Lampsum-Type uint32 (sums) or float32', raw: 'application/octet-stream' }),
  'POST /api/frame-sets/:id/solve': route({ permission: 'frameSet.solve', scope: 'frameSet', summary: 'Solve a draft again from its stored sums, with these repetitions left out; all are accepted with an empty list, and none is changed without one', body: results.solveSchema, response: results.frameSetSchema }),
  'POST /api/frame-sets/:id/release': route({ permission: 'frameSet.release', scope: 'frameSet', summary: 'Release to guests, with a note', body: results.releaseSchema, response: okSchema }),

  // the whole
  'GET /api/home': route({ permission: 'self', scope: 'none', summary: 'What needs the caller now', response: results.homeSchema }),
  'GET /api/events': route({ permission: 'self', scope: 'none', summary: 'Live events (text/event-stream), honours Last-Event-ID', raw: 'text/event-stream' }),
  'GET /api/health': route({ permission: 'public', scope: 'none', summary: 'Is all well', response: results.healthSchema }),
  'GET /api/openapi.json': route({ permission: 'public', scope: 'none', summary: 'This contract' }),
} as const satisfies Record<string, RouteSpec>

export type RouteKey = keyof typeof routes
