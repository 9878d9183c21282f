import { mkdirSync, readFileSync, writeFileSync } from 'node:fs'
import { join } from 'node:path'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { writeNpy } from '../../jobs/formats/npy'
import { readNpz, writeNpz } from '../../jobs/formats/npz'
import { check } from '../../jobs/stages/check'
import { digestOf } from '../../jobs/stages/sumDigest'
import type { FrameSetReview } from '../../shared/frameSetReview'
import type { Group } from '../../shared/measurement'
import { solverFolder, storedLine } from '../support/solvedSets'

type Payload = Parameters<typeof check.run>[0]
const sampleRateHz = 8000
const frameRateHz = 50
const repetitions = 4
const frames = repetitions * 4 * 50
let folder: Awaited<ReturnType<typeof solverFolder>>
let payload: Payload
let runs = 0

const run = (changes: Partial<Payload> = {}) => {
  const workDir = join(folder.root, `run-${++runs}`)
  mkdirSync(workDir)
  return check.run({ ...payload, ...changes }, { signal: new AbortController().signal, workDir, progress: () => {}, log: () => {} })
}
const prior = (review: FrameSetReview): Payload['prior'] => [{ id: 'set-1', line: 1, review }]

/** Four repetitions of dark, reference, sine and cosine at 400 Hz, fifty frames each, with a lamp signal to match. */
beforeAll(async () => {
  folder = await solverFolder()
  const { groups, digests, content } = await storedLine(join(folder.root, 'sums'), { repetitions })
  const lamp = Float32Array.from({ length: sampleRateHz * (frames / frameRateHz + 1) }, (_, i) => {
    const seconds = i / sampleRateHz
    const kind = Math.floor(seconds * frameRateHz / 50) % 4
    const angle = 2 * Math.PI * 400 * seconds
    const level = 2 + 0.02 * (1 + Math.floor(seconds * frameRateHz / 200))
    return kind === 0 ? 0.002 : level + (kind === 2 ? 1.6 * Math.sin(angle) : kind === 3 ? 1.6 * Math.cos(angle) : 0)
  })
  const write = (name: string, bytes: Uint8Array) => {
    writeFileSync(join(folder.root, name), bytes)
    return join(folder.root, name)
  }
  const column = (value: (frame: number) => number) => ({ dtype: 'float64' as const, shape: [frames], data: Float64Array.from({ length: frames }, (_, frame) => value(frame)) })
  payload = {
    clip: { width: content.width, height: content.height } as Payload['clip'], groups, cutListVersion: 1,
    sums: Object.fromEntries(groups.map((group: Group, g: number) => [group.id, content.sources[g]!.path])),
    digests: Object.fromEntries(groups.map((group: Group, g: number) => [group.id, digests[g]!])),
    meter: write('meter', writeNpz({ light: column(frame => Math.floor(frame / 50) % 4 ? 0.4 : 0.001), clipped: column(() => 0), black: column(() => 0.01) })),
    frameTimes: write('times', writeNpy({ dtype: 'float64', shape: [frames], data: Float64Array.from({ length: frames }, (_, frame) => frame / frameRateHz) })),
    illumination: write('lamp', new Uint8Array(lamp.buffer)),
    force: write('force', new Uint8Array(Float32Array.from(lamp, (_, i) => 5 * Math.cos(2 * Math.PI * 400 * i / sampleRateHz + 0.7)).buffer)),
    sampleRateHz, darkLevel: 0, alignment: { offsetSeconds: 0, driftPpm: 0 }, exposureSeconds: 1 / frameRateHz,
    provenance: { program: { version: '1', stages: {} }, inputs: [], settings: { plan: [] }, clip: {}, record: {}, alignment: { version: 1, offsetSeconds: 0, driftPpm: 0 }, cutListVersion: 1 } as unknown as Payload['provenance'],
    prior: [],
  }
})
afterAll(() => folder.remove())

describe('the check stage', () => {
  it('solves a line, with the force over the groups’ own exposures', async () => {
    const { state, lines } = await run()
    expect([state, lines.map(line => line.flags)]).toEqual(['done', [[]]])
    const { force, accepted } = readNpz(readFileSync(lines[0]!.set!.files[0]!.path))
    expect(force!.data[0]).toBeCloseTo(5 * Math.cos(0.7), 4)
    expect(force!.data[1]).toBeCloseTo(5 * Math.sin(0.7), 4)
    expect(accepted!.data.every(Boolean)).toBe(true)
  })

  it('keeps the set of a line whose inputs are what they were, whatever the versions of cut list, alignment and plan', async () => {
    const first = await run()
    const provenance = { ...payload.provenance, cutListVersion: 7, alignment: { ...payload.provenance.alignment, version: 3 }, settings: { ...payload.provenance.settings, plan: [{ frequencyHz: 1 }] } } as Payload['provenance']
    const second = await run({ cutListVersion: 7, provenance, prior: prior(first.lines[0]!.set!.review) })
    expect(second.lines).toEqual([{ line: 1, keep: 'set-1', flags: [] }])
    expect(second.files).toEqual({})
    expect(second.message).toBe('1 frame set ready, 1 of them unchanged.')
  })

  it.each<[string, (now: Payload) => Partial<Payload>]>([
    ['a boundary moved', now => ({ groups: now.groups.map((group, g) => g === 1 ? { ...group, frameCount: 49 } : group) })],
    ['a sum changed', (now) => {
      const path = join(folder.root, 'other-sum')
      const bytes = readFileSync(now.sums[now.groups[2]!.id]!)
      bytes[100]! ^= 1
      writeFileSync(path, bytes)
      return { sums: { ...now.sums, [now.groups[2]!.id]: path }, digests: { ...now.digests, [now.groups[2]!.id]: digestOf(bytes) } }
    }],
    ['the alignment moved', () => ({ alignment: { offsetSeconds: 1e-5, driftPpm: 0 } })],
    ['the dark level changed', () => ({ darkLevel: 0.001 })],
    ['the program changed', now => ({ provenance: { ...now.provenance, program: { version: '2', stages: {} } } })],
  ])('makes the set anew when %s', async (_, change) => {
    const first = await run()
    const second = await run({ ...change(payload), prior: prior(first.lines[0]!.set!.review) })
    expect(second.lines[0]!.keep).toBeUndefined()
    expect(second.lines[0]!.set!.files).toHaveLength(2)
  })

  it('carries a person’s decisions over while the repetition’s sums are what they were, and drops them where they changed', async () => {
    const first = await run()
    const person = { by: 'A. Analyst', byId: 'u1', reason: 'Rejected by A. Analyst.' }
    const history = [{ at: '2026-01-01T00:00:00.000Z', byName: 'A. Analyst', byId: 'u1', rejected: [2, 3] }]
    const review = { ...first.lines[0]!.set!.review, rejections: [{ repetition: 2, ...person }, { repetition: 3, ...person }], history }
    const path = join(folder.root, 'changed-sum')
    const changed = payload.groups.find(group => group.repetition === 3 && group.role === 'reference')!
    const bytes = readFileSync(payload.sums[changed.id]!)
    bytes[4]! ^= 1
    writeFileSync(path, bytes)
    const { set } = (await run({ sums: { ...payload.sums, [changed.id]: path }, digests: { ...payload.digests, [changed.id]: digestOf(bytes) }, prior: prior(review) })).lines[0]!
    expect(set!.review.rejections).toEqual([{ repetition: 2, ...person }])
    expect(set!.review.history).toEqual(history)
    expect(set!.groups.filter(group => !group.accepted).map(group => [group.repetition, group.role])).toEqual([[2, 'reference'], [2, 'phase'], [2, 'phase']])
  })

  it('takes a repetition that the cut list leaves out for rejected there', async () => {
    const groups = payload.groups.map(group => group.repetition === 4 ? { ...group, accepted: false } : group)
    const { set } = (await run({ groups })).lines[0]!
    expect(set!.review.rejections).toEqual([{ repetition: 4, by: 'cut list', byId: null, reason: 'Left out in the cut list.' }])
    expect(set!.groups.filter(group => group.accepted && group.role !== 'dark').map(group => group.repetition)).toEqual([1, 1, 1, 2, 2, 2, 3, 3, 3])
  })
})
