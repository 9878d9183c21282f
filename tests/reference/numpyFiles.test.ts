import { createWriteStream, writeFileSync } from 'node:fs'
import { open, readFile, stat } from 'node:fs/promises'
import { Readable } from 'node:stream'
import { pipeline } from 'node:stream/promises'
import { describe, expect, it } from 'vitest'
import { readNpy, writeNpy, type NpyArray } from '../../jobs/formats/npy'
import { npzChunks, openNpz, readNpz, writeNpz } from '../../jobs/formats/npz'
import { numpyFolder } from './numpy'

const { path, python } = numpyFolder()
const arrays: Record<string, NpyArray> = {
  sums: { dtype: 'uint32', shape: [2, 3, 4], data: Uint32Array.from({ length: 24 }, (_, i) => 4294967295 - 1000 * i) },
  frames: { dtype: 'int32', shape: [3], data: Int32Array.of(-2147483648, 0, 2147483647) },
  accepted: { dtype: 'uint8', shape: [3], data: Uint8Array.of(1, 0, 255) },
  integrals: { dtype: 'float64', shape: [2, 3], data: Float64Array.of(1.1, -2.2, 1e300, 0, Math.PI, 5e-324) },
  frequency_hz: { dtype: 'float64', shape: [], data: Float64Array.of(437.25) },
  force: { dtype: 'complex128', shape: [], data: Float64Array.of(3.5, -4.25) },
  scene: { dtype: 'float32', shape: [2, 2], data: Float32Array.of(0.1, -7, 1e-40, 3) },
  ux: { dtype: 'complex64', shape: [2, 1], data: Float32Array.of(0.5, 0.25, -1, 2) },
  none: { dtype: 'float64', shape: [0, 3], data: new Float64Array(0) },
}
const describeArrays = (file: string) => `
z = np.load('${file}', allow_pickle=False)
flat = lambda a: [x for v in a.ravel() for x in ((float(v.real), float(v.imag)) if np.iscomplexobj(a) else (float(v),))]
print(json.dumps({k: {'dtype': str(z[k].dtype), 'shape': list(z[k].shape), 'values': flat(z[k]), 'order': bool(z[k].flags['C_CONTIGUOUS'])} for k in z.files}))`
const expected = Object.fromEntries(Object.entries(arrays).map(([name, { dtype, shape, data }]) => [name, { dtype, shape, values: [...data], order: true }]))

describe('numpy (Debian’s) reads', () => {
  it('every type and shape of an NPZ, without pickle', () => {
    writeFileSync(path('set.npz'), writeNpz(arrays))
    expect(python(describeArrays('set.npz'))).toEqual(expected)
  })

  it('an NPZ with 64-bit records', () => {
    writeFileSync(path('large.npz'), writeNpz(arrays, { zip64: true }))
    expect(python(describeArrays('large.npz'))).toEqual(expected)
  })

  it('an NPZ that was written in chunks, and Python’s zipfile finds every checksum right', async () => {
    await pipeline(Readable.from(npzChunks(arrays)), createWriteStream(path('chunks.npz')))
    expect(python(describeArrays('chunks.npz'))).toEqual(expected)
    expect(python('import zipfile\nprint(json.dumps(zipfile.ZipFile("chunks.npz").testzip()))')).toBeNull()
  })

  it('a single NPY', () => {
    writeFileSync(path('one.npy'), writeNpy(arrays.integrals))
    expect(python('a = np.load("one.npy", allow_pickle=False)\nprint(json.dumps([list(a.shape), a.ravel().tolist()]))')).toEqual([[2, 3], [...arrays.integrals.data]])
  })
})

describe('what numpy writes', () => {
  const make = 'import zipfile\n'
    + 'np.savez("theirs.npz", sums=np.arange(24, dtype=np.uint32).reshape(2, 3, 4), force=np.complex128(1 - 2j), ux=np.array([[1 + 2j]], np.complex64), flags=np.array([1, 0], np.uint8), s=np.float32(2.5), n=np.array([-3], np.int32))\n'
    + 'np.save("theirs.npy", np.linspace(0, 1, 7))\nprint("null")'
  const theirs: Record<string, NpyArray> = {
    sums: { dtype: 'uint32', shape: [2, 3, 4], data: Uint32Array.from({ length: 24 }, (_, i) => i) },
    force: { dtype: 'complex128', shape: [], data: Float64Array.of(1, -2) },
    ux: { dtype: 'complex64', shape: [1, 1], data: Float32Array.of(1, 2) },
    flags: { dtype: 'uint8', shape: [2], data: Uint8Array.of(1, 0) },
    s: { dtype: 'float32', shape: [], data: Float32Array.of(2.5) },
    n: { dtype: 'int32', shape: [1], data: Int32Array.of(-3) },
  }

  it('is read whole', async () => {
    python(make)
    expect(readNpz(await readFile(path('theirs.npz')))).toEqual(theirs)
    expect(readNpy(await readFile(path('theirs.npy'))).data[6]).toBe(1)
  })

  it('is read member by member', async () => {
    const file = await open(path('theirs.npz'))
    try {
      const npz = await openNpz((await stat(path('theirs.npz'))).size, async (offset, length) => (await file.read(new Uint8Array(length), 0, length, offset)).buffer)
      for (const name of npz.names) expect(await npz.array(name)).toEqual(theirs[name])
      expect(npz.names).toEqual(Object.keys(theirs))
    } finally {
      await file.close()
    }
  })

  it('is refused with a sentence when it is compressed', async () => {
    python('np.savez_compressed("small.npz", a=np.zeros(3))\nprint("null")')
    const bytes = await readFile(path('small.npz'))
    expect(() => readNpz(bytes)).toThrow(/compressed/)
  })
})
