import { createHash } from 'node:crypto'
import { mkdirSync, readFileSync, writeFileSync } from 'node:fs'
import { join } from 'node:path'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { readNpz } from '../../jobs/formats/npz'
import { withRejections } from '../../jobs/imaging/review'
import { solveFrameSet } from '../../jobs/imaging/solve'
import { solveAgain } from '../../jobs/stages/solveAgain'
import { createSolvePool, type SolvePool } from '../../jobs/stages/solvePool'
import { solverFolder, storedLine, writeStored, type StoredLine } from '../support/solvedSets'
import { numpyFolder } from './numpy'

const { path, python } = numpyFolder()
let folder: Awaited<ReturnType<typeof solverFolder>>
let line: StoredLine
const pools: SolvePool[] = []
const pool = (threads: number) => {
  const made = createSolvePool({ threads, entry: folder.entry })
  pools.push(made)
  return made
}
const bytesOf = (files: { name: string, path: string }[]) => Object.fromEntries(files.map(file => [file.name, readFileSync(file.path)]))
const again = (from: { name: string, path: string }[], to: string, rejected: number[], by: SolvePool) => {
  mkdirSync(join(folder.root, to))
  const [npz, manifest] = ['frameset.npz', 'manifest.json'].map(name => from.find(file => file.name === name)!.path)
  return solveAgain({ folder: join(folder.root, to), npz: npz!, manifest: manifest!, line: 1, frequencyHz: 400, groups: withRejections(line.groups, rejected), checks: [], rejections: [] }, by)
}

beforeAll(async () => {
  folder = await solverFolder()
  line = await storedLine(join(folder.root, 'sums'))
})
afterAll(async () => {
  await Promise.all(pools.map(each => each.close()))
  folder.remove()
})

describe('a frame set', () => {
  it('has the same bytes with one, two and three threads, and states its own size and hash', async () => {
    const sets = [await writeStored(join(folder.root, 'one'), line, createSolvePool({ threads: 1 })), await writeStored(join(folder.root, 'two'), line, pool(2)), await writeStored(join(folder.root, 'three'), line, pool(3))]
    const [one, ...others] = sets.map(set => bytesOf(set.files))
    for (const other of others) for (const name of ['frameset.npz', 'manifest.json']) expect(other[name]!.equals(one![name]!), name).toBe(true)
    for (const { name, bytes, sha256 } of sets[0]!.files) expect([bytes, sha256]).toEqual([one![name]!.length, createHash('sha256').update(one![name]!).digest('hex')])
  })

  it('holds the solution that all pixels solved at once have, bit for bit, and opens in numpy with every checksum right', async () => {
    const { files } = await writeStored(join(folder.root, 'whole'), line, pool(2))
    const bytes = bytesOf(files)['frameset.npz']!
    const arrays = readNpz(bytes)
    const { content: { integrals, width, height }, groups } = line
    const sums = line.content.sources.map(source => new Uint32Array(readFileSync(source.path).buffer.slice(0)))
    const solution = solveFrameSet({ sums: sums.map(sum => sum.subarray(0, width * height)), roles: groups.map(group => group.role), integrals, frames: groups.map(group => group.frameCount), width, height })
    for (const name of ['scene', 'p', 'q', 'noise'] as const) expect(Buffer.from(arrays[name]!.data.buffer).equals(Buffer.from(solution[name].buffer)), name).toBe(true)
    writeFileSync(path('set.npz'), bytes)
    const theirs = python<{ bad: string | null, names: string[], sums: number, force: number[] }>(`
import zipfile
z = np.load('set.npz')
print(json.dumps({'bad': zipfile.ZipFile('set.npz').testzip(), 'names': z.files, 'sums': int(z['sums'].astype(np.uint64).sum()), 'force': [z['force'].real.item(), z['force'].imag.item()]}))`)
    expect(theirs).toEqual({
      bad: null, names: ['sums', 'frames', 'first_frame', 'repetition', 'role', 'lamp_phase_deg', 'accepted', 'integrals', 'frequency_hz', 'force', 'scene', 'p', 'q', 'noise'],
      sums: sums.reduce((total, sum) => total + sum.reduce((inner, value) => inner + value, 0), 0), force: [3 + (1 + 2 + 3 + 5 + 6 + 7 + 9 + 10 + 11) / 9, -1],
    })
  })
})

describe('a frame set solved again', () => {
  it('leaves the rejected repetition out, and equals numpy.linalg.lstsq without it', async () => {
    const first = await writeStored(join(folder.root, 'first'), line, createSolvePool({ threads: 1 }))
    const { files } = await again(first.files, 'rejected', [2], pool(2))
    writeFileSync(path('again.npz'), bytesOf(files)['frameset.npz']!)
    const theirs = python<{ worst: number[], accepted: number[] }>(`
z = np.load('again.npz'); use = z['accepted'] == 1
M = np.hstack([z['integrals'], z['frames'][:, None].astype(float)])[use]; I = z['sums'][use].reshape(use.sum(), -1).astype(float)
x = np.linalg.lstsq(M, I, rcond=None)[0]
print(json.dumps({'worst': [float(np.abs(x[k] - z[n].ravel()).max() / np.abs(x[k]).max()) for k, n in enumerate(['scene', 'p', 'q'])], 'accepted': z['accepted'].tolist()}))`)
    for (const worst of theirs.worst) expect(worst).toBeLessThan(3e-7)
    expect(theirs.accepted).toEqual([1, 1, 1, 1, 1, 0, 0, 0, 1, 1, 1, 1])
  })

  it('has its first bytes back when the repetition is taken in again', async () => {
    const first = await writeStored(join(folder.root, 'before'), line, createSolvePool({ threads: 1 }))
    const without = await again(first.files, 'without', [1], createSolvePool({ threads: 1 }))
    expect(bytesOf(without.files)['frameset.npz']!.equals(bytesOf(first.files)['frameset.npz']!)).toBe(false)
    const back = await again(without.files, 'back', [], pool(2))
    expect(bytesOf(back.files)['frameset.npz']!.equals(bytesOf(first.files)['frameset.npz']!)).toBe(true)
  })

  it('is refused when too little would be left, before anything is written', async () => {
    const first = await writeStored(join(folder.root, 'enough'), line, createSolvePool({ threads: 1 }))
    await expect(again(first.files, 'nothing', [1, 2, 3], createSolvePool({ threads: 1 }))).rejects.toMatchObject({ code: 'too-few-groups', message: expect.stringMatching(/0 and 0 are accepted/) })
  })

  it('finds out that a byte of the stored sums has changed', async () => {
    const first = await writeStored(join(folder.root, 'flipped'), line, createSolvePool({ threads: 1 }))
    const npz = first.files.find(file => file.name === 'frameset.npz')!
    const bytes = readFileSync(npz.path)
    bytes[5000]! ^= 1
    writeFileSync(npz.path, bytes)
    await expect(again(first.files, 'damaged', [2], createSolvePool({ threads: 1 }))).rejects.toMatchObject({ code: 'sums-damaged' })
  })
})
