import { writeFileSync } from 'node:fs'
import { describe, expect, it } from 'vitest'
import { writeNpz } from '../../jobs/formats/npz'
import { exposureIntegrals } from '../../jobs/signal/exposureIntegrals'
import { createLightIntegrals } from '../../jobs/signal/lightPrediction'
import { fitSine3, fitSine4, frequencyDeviationHz } from '../../jobs/signal/sineFit'
import { chooseWholePeriods } from '../../jobs/signal/wholePeriods'
import { gaussianRandom } from '../support/forward/random'
import { numpyFolder } from './numpy'

const { path, python } = numpyFolder()

/** Stretches that a lamp gives: low and high rates, part periods, noise, an overtone. */
const cases = [
  { rate: 10_000, count: 10_000, hz: 211.37, amplitude: 0.9, phase: 0.7, offset: 1.02, noise: 0.01, overtone: 0.03 },
  { rate: 5000, count: 5000, hz: 769.23, amplitude: 0.2, phase: -2.1, offset: 3, noise: 0.02, overtone: 0 },
  { rate: 20_000, count: 3217, hz: 41.31, amplitude: 2.5, phase: 3, offset: 4.5, noise: 0.05, overtone: 0.1 },
  { rate: 6000, count: 7011, hz: 999.9, amplitude: 1, phase: 1.5, offset: 0, noise: 0.3, overtone: 0 },
]

function samplesOf(c: typeof cases[number], seed: number): Float64Array {
  const normal = gaussianRandom(seed)
  return Float64Array.from({ length: c.count }, (_, i) => {
    const angle = 2 * Math.PI * c.hz * i / c.rate
    return c.offset + c.amplitude * Math.sin(angle + c.phase) + c.overtone * Math.sin(2 * angle) + c.noise * normal()
  })
}

interface Theirs { three: number[], threeRms: number, four: number[], fourRms: number, deviationHz: number }

describe.each(cases.map((c, k) => [c.hz, c, k] as const))('IEEE Std 1057 sine fits of %s Hz', (_, c, k) => {
  const samples = samplesOf(c, 40 + k)
  const guessHz = c.hz + 0.3 * c.rate / c.count

  it('equal numpy.linalg.lstsq with three parameters and scipy.optimize.least_squares with four, covariance included', () => {
    writeFileSync(path('sine.npz'), writeNpz({ y: { dtype: 'float64', shape: [samples.length], data: samples } }))
    const theirs = python<Theirs>(`
from scipy.optimize import least_squares
y = np.load('sine.npz')['y']; t = np.arange(len(y)) / ${c.rate}
def columns(f): return np.stack([np.sin(2*np.pi*f*t), np.cos(2*np.pi*f*t), np.ones_like(t)], 1)
x, *_ = np.linalg.lstsq(columns(${c.hz}), y, rcond=None)
r3 = y - columns(${c.hz}) @ x
tm = t - t.mean()
def model(p): return p[0]*np.sin(2*np.pi*p[3]*tm) + p[1]*np.cos(2*np.pi*p[3]*tm) + p[2]
def jac(p):
  s, c = np.sin(2*np.pi*p[3]*tm), np.cos(2*np.pi*p[3]*tm)
  return np.stack([s, c, np.ones_like(tm), 2*np.pi*tm*(p[0]*c - p[1]*s)], 1)
b = 2*np.pi*${guessHz}*tm
start, *_ = np.linalg.lstsq(np.stack([np.sin(b), np.cos(b), np.ones_like(tm)], 1), y, rcond=None)
fit = least_squares(lambda p: model(p) - y, [*start, ${guessHz}], jac=jac, x_scale='jac', xtol=1e-15, ftol=1e-15, gtol=1e-15, method='lm')
p = fit.x
phase = np.arctan2(p[1], p[0]) - 2*np.pi*p[3]*t.mean()
covariance = np.linalg.inv(jac(p).T @ jac(p)) * (fit.fun @ fit.fun) / len(y)
print(json.dumps({'three': x.tolist(), 'threeRms': float(np.sqrt(np.mean(r3**2))), 'four': [float(np.hypot(p[0], p[1])), float(np.degrees(phase)), float(p[2]), float(p[3])], 'fourRms': float(np.sqrt(np.mean(fit.fun**2))), 'deviationHz': float(np.sqrt(covariance[3, 3]))}))`)
    const three = fitSine3(samples, c.rate, c.hz)
    ;[three.sine, three.cosine, three.offset].forEach((value, n) => expect(value).toBeCloseTo(theirs.three[n], 10))
    expect(three.rmsResidual).toBeCloseTo(theirs.threeRms, 10)
    const four = fitSine4(samples, c.rate, guessHz)
    expect(four.amplitude).toBeCloseTo(theirs.four[0], 7)
    expect(Math.cos((four.phaseDeg - theirs.four[1]) * Math.PI / 180)).toBeCloseTo(1, 10)
    expect(four.offset).toBeCloseTo(theirs.four[2], 7)
    expect(Math.abs(four.frequencyHz - theirs.four[3])).toBeLessThan(1e-7)
    expect(four.rmsResidual).toBeCloseTo(theirs.fourRms, 9)
    expect(frequencyDeviationHz(four, c.count, c.rate) / theirs.deviationHz).toBeCloseTo(1, 1)
  })
})

describe('part periods leak as the Dirichlet kernel says', () => {
  it('n gap-free exposures of a unit sine: |sin(n·πfT)/(n·sin(πfT))| times one exposure\'s |sin(πfT)/(πfT)|', () => {
    // Closed form of the sum of a geometric series; numpy sums it term by term.
    for (const [frequencyHz, frames] of [[211.3, 50], [203.01, 97], [61.7, 25]] as const) {
      const x = Math.PI * frequencyHz / 50
      const closed = Math.abs(Math.sin(frames * x) / (frames * Math.sin(x)) * Math.sin(x) / x)
      const summed = python<number>(`
k = np.arange(${frames}); T = 1/50; w = 2*np.pi*${frequencyHz}
print(json.dumps(float(abs(np.sum((np.exp(1j*w*(k+1)*T) - np.exp(1j*w*k*T))/(1j*w*T)))/${frames})))`)
      const startsSeconds = Float64Array.from({ length: frames }, (_, k) => k / 50)
      const { error } = chooseWholePeriods({ startsSeconds, exposureSeconds: 1 / 50, frequencyHz, depth: 0 }, 1)
      expect(error).toBeCloseTo(closed, 12)
      expect(error).toBeCloseTo(summed, 10)
    }
  })
})

describe('A, C and S of a group', () => {
  it.each([[5000, 769.23, 0.2], [10_000, 211.37, 0.9], [100_000, 1203.3, 1]])('at %s samples a second and %s Hz equal scipy.integrate.quad of the light that was sampled', (rate, frequencyHz, depth) => {
    const seconds = 2.5
    const phase = 0.6
    const illumination = Float32Array.from({ length: seconds * rate }, (_, i) => 0.02 + 1.5 * (1 + depth * Math.sin(2 * Math.PI * frequencyHz * i / rate + phase)))
    const timing = { frameTimesSeconds: Float64Array.from({ length: 100 }, (_, k) => k / 50), exposureSeconds: 0.017, offsetSeconds: 0.1234, driftPpm: 150 }
    const ours = exposureIntegrals(createLightIntegrals(illumination, rate, 0.02), timing, { frequencyHz, firstFrame: 7, frameCount: 20 })
    const theirs = python<[number, number, number]>(`
from scipy.integrate import quad
w = 2*np.pi*${frequencyHz}; T = ${timing.exposureSeconds}
L = lambda t: 1.5*(1 + ${depth}*np.sin(w*t + ${phase}))
total = [0, 0, 0]
for k in range(7, 27):
  a = ${timing.offsetSeconds} + (1 + 150e-6)*k/50
  for n, g in enumerate([L, lambda t: L(t)*np.cos(w*t), lambda t: L(t)*np.sin(w*t)]):
    total[n] += quad(g, a, a + T, limit=500, epsabs=1e-11)[0]/T
print(json.dumps(total))`)
    const scale = theirs[0]
    expect(Math.abs(ours.A - theirs[0]) / scale).toBeLessThan(1e-4)
    expect(Math.abs(ours.C - theirs[1]) / scale).toBeLessThan(1e-4)
    expect(Math.abs(ours.S - theirs[2]) / scale).toBeLessThan(1e-4)
  })
})
