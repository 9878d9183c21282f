import { buildSchedule, defineScenario, type RegimeSpec, type Scenario } from '../forward'
import { seededRandom } from '../forward/random'

/** Offsets and drifts as a camera and a data-acquisition system have them; lamps as good and as bad as they come. */
export function drawSchedule(seed: number): Scenario {
  const uniform = seededRandom(7000 + seed)
  const pick = <T>(list: readonly T[]): T => list[Math.floor(uniform() * list.length)]!
  const between = (low: number, high: number) => low + (high - low) * uniform()
  const sampleRateHz = pick([5000, 10_000, 10_000, 20_000])
  const highestHz = sampleRateHz / 6.5
  const phaseSeconds = between(1, 2.5)
  const draw = () => ({ frequencyHz: Math.min(highestHz, Math.exp(between(Math.log(40), Math.log(900)))), repetitions: pick([2, 2, 3]) })
  const lines = [draw(), draw()].slice(0, pick([1, 1, 2]))
  // Whole hertz of the plan must tell lines apart.
  if (lines[1] && Math.abs(lines[1].frequencyHz - lines[0]!.frequencyHz) < 3) lines[1].frequencyHz = lines[0]!.frequencyHz / 1.3
  const levelVolts = between(0.5, 5)
  const dark = pick(['all', 'all', 'all', 'ends', 'none'])
  const quarter = pick([90, 90, 90, between(75, 105)])
  const regimes = levels(buildSchedule({
    startSeconds: between(-0.3, 0.6), lines, darkSeconds: between(0.5, 1), referenceSeconds: between(1, 2), phaseSeconds, levelVolts,
    depth: between(0.2, 1), phasesDeg: [between(-180, 180), 0].map((phase, k, all) => k ? all[0]! + quarter : phase), unevenness: 0.2, darkBetweenRepetitions: pick([true, false]),
  }), dark, between(0.7, 1), uniform)
  const frameRate = pick([[25, 1], [30_000, 1001], [50, 1], [60, 1]] as const)
  const interval = frameRate[1] / frameRate[0]
  const end = regimes.at(-1)!.endSeconds
  return defineScenario({
    seed, width: 16, height: 16, lines: lines.map(({ frequencyHz }) => ({ frequencyHz, field: [], forceNewtons: [1, 0] })),
    lamp: { regimes, darkVolts: dark === 'none' ? 0 : between(-0.02, 0.05), settlingSeconds: 0 },
    clock: { offsetSeconds: between(-1, 1), driftPpm: between(-200, 200) },
    camera: { frameRate: { numerator: frameRate[0], denominator: frameRate[1] }, exposureSeconds: interval * pick([1, 1, 0.9, 0.5]) },
    record: {
      // Some records stop in the middle of the last lit regime.
      sampleRateHz, durationSeconds: pick([end, end, end + 0.5, regimes.findLast(regime => regime.kind === 'phase')!.endSeconds - 0.3]),
      lampNoiseVolts: levelVolts * between(0.001, 0.01), mainsVolts: pick([0, levelVolts * between(0, 0.02)]), mainsHz: pick([50, 60, 100]),
    },
  })
}

/** Unequal levels from regime to regime, and darks left out. */
function levels(regimes: RegimeSpec[], dark: string, least: number, uniform: () => number): RegimeSpec[] {
  const kept = regimes.filter((regime, k) => regime.kind !== 'dark' || dark === 'all' || (dark === 'ends' && (k === 0 || k === regimes.length - 1)))
  let now = kept[0]!.startSeconds
  let level = 1
  return kept.map((regime) => {
    if (regime.kind === 'reference') level = least + (1 - least) * uniform()
    const startSeconds = now
    now += regime.endSeconds - regime.startSeconds
    return { ...regime, startSeconds, endSeconds: now, levelVolts: regime.levelVolts * level }
  })
}
