import { readFile } from 'node:fs/promises'
import { describe, expect, it } from 'vitest'
import { readNpz } from '../../jobs/formats/npz'
import { estimateShift } from '../../jobs/imaging/shift'
import { numpyFolder } from './numpy'

const { path, python } = numpyFolder()
const [width, height] = [240, 200]
const shifts = [[0.05, -0.02], [0.13, 0.41], [-0.5, 0.25], [0.9, -0.7], [2.35, -3.6], [-7.25, 5.5]]

/** Blurred noise, as a speckle pattern is, moved by scipy; `scipy` counts rows first. */
const speckle = (move: string) => `
from scipy import ndimage
rng = np.random.default_rng(3)
a = ndimage.gaussian_filter(rng.random((${height} + 40, ${width} + 40)), 1.6, mode='wrap')
a = 2e6 * (a - a.min()) / (a.max() - a.min()) + 1e5
crop = lambda x: np.ascontiguousarray(np.rint(x[20:-20, 20:-20]).clip(0).astype(np.uint32))
out = {'a': crop(a)}
for k, (dx, dy) in enumerate(${JSON.stringify(shifts)}):
    out['b%d' % k] = crop(${move})
np.savez('pair.npz', **out)
print('null')`

describe.each([
  ['scipy.ndimage.fourier_shift', 'np.fft.ifft2(ndimage.fourier_shift(np.fft.fft2(a), (dy, dx))).real', 0.003],
  ['scipy.ndimage.shift, quintic spline', 'ndimage.shift(a, (dy, dx), order=5, mode="grid-wrap")', 0.005],
  ['scipy.ndimage.shift, cubic spline', 'ndimage.shift(a, (dy, dx), mode="grid-wrap")', 0.01],
])('a speckle pattern moved by %s', (_, move, bound) => {
  it(`has every shift recovered within ${bound} px`, async () => {
    python(speckle(move))
    const pictures = readNpz(await readFile(path('pair.npz')))
    shifts.forEach(([dx, dy], k) => {
      const found = estimateShift(pictures.a.data, pictures[`b${k}`].data, width, height)
      expect(found.converged).toBe(true)
      expect(Math.abs(found.dx - dx), `dx of ${dx}, ${dy}`).toBeLessThan(bound)
      expect(Math.abs(found.dy - dy), `dy of ${dx}, ${dy}`).toBeLessThan(bound)
    })
  })
})
