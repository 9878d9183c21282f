import { buildSchedule, defineScenario, type RegimeSpec, type Scenario } from '../../tests/support/forward'

/**
 * The demo's laboratory, Grauenfell Structures Laboratory, its specimens and its takes. All of it is invented; the
 * clips and records are made by the forward model.
 */
export const laboratory = 'Grauenfell Structures Laboratory'

export interface DemoCampaign { key: string, name: string, specimen: string, notes: string }

export const demoCampaigns: DemoCampaign[] = [
  {
    key: 'cover', name: 'Relay cover RC-4, free survey', specimen: 'Cast aluminium cover RC-4, 70 × 40 mm, two seats, sprayed speckle',
    notes: 'Hung on two soft cords, small shaker with stinger at the lower left corner, force cell at the drive point. Lamp array at 0.6 m.',
  },
  {
    key: 'disc', name: 'Pump disc PD-11, before balancing', specimen: 'Titanium disc PD-11, 62 mm, bore 16 mm, eight bolt holes',
    notes: 'Clamped at the bore on the seismic block. Diametral pairs expected close together: keep the lines apart by more than their width.',
  },
]

export interface DemoTake {
  key: 'untouched' | 'bumped' | 'uploading' | 'failed'
  campaign: DemoCampaign['key']
  title: string
  notes: string
  scenario: Scenario
  /** File names as camera and acquisition system gave them. */
  clipName: string
  recordName: string | null
}

const lampVolts = 2.2
const camera = { lightPerVolt: 0.36, ambientVolts: 0.004, frameRate: { numerator: 50, denominator: 1 }, exposureSeconds: 0.02 }
const panel = (seed: number) => ({ kind: 'panel' as const, seed, blurPixels: 1.6, contrast: 0.42 })
const disc = (seed: number) => ({ kind: 'disc' as const, seed, blurPixels: 1.6, contrast: 0.42 })
const schedule = (startSeconds: number, lines: { frequencyHz: number, repetitions: number }[], seconds = 1) => buildSchedule({
  startSeconds, lines, darkSeconds: 0.6, referenceSeconds: 0.95 * seconds, phaseSeconds: seconds, levelVolts: lampVolts, depth: 0.92, unevenness: 0.08,
})

function untouchedTake(): Scenario {
  const lines = [{ frequencyHz: 187.3, repetitions: 3 }, { frequencyHz: 341.7, repetitions: 3 }]
  return defineScenario({
    seed: 41, width: 320, height: 192, millimetresPerPixel: 0.25, scene: panel(401), camera,
    lines: [
      { frequencyHz: 187.3, forceNewtons: [4.1, -0.6], field: [{ ux: [0.16, 0.03], uy: [0, 0], halfWavesX: 1 }, { ux: [0, 0], uy: [0.11, 0.04], halfWavesX: 2, halfWavesY: 1 }] },
      { frequencyHz: 341.7, forceNewtons: [2.7, 0.9], field: [{ ux: [0.02, 0.09], uy: [0, 0], halfWavesX: 1, halfWavesY: 2 }, { ux: [0, 0], uy: [-0.03, 0.1], halfWavesX: 3 }] },
    ],
    lamp: { darkVolts: 0.021, regimes: schedule(0.9, lines) },
    clock: { offsetSeconds: 0.6137, driftPpm: 9 },
    record: { durationSeconds: 0.9 + 21, mainsVolts: 0.002 },
  })
}

function bumpedTake(): Scenario {
  const regimes = schedule(1.4, [{ frequencyHz: 268.9, repetitions: 4 }])
  const clock = { offsetSeconds: 1.1821, driftPpm: -6 }
  const clipSeconds = (recordSeconds: number) => (recordSeconds - clock.offsetSeconds) / (1 + clock.driftPpm * 1e-6)
  return defineScenario({
    seed: 42, width: 320, height: 192, millimetresPerPixel: 0.25, scene: panel(402), clock,
    lines: [{ frequencyHz: 268.9, forceNewtons: [3.3, 0.4], field: [{ ux: [0.14, -0.02], uy: [0.03, 0.01], halfWavesX: 2, halfWavesY: 1 }, { ux: [0, 0], uy: [0.09, -0.05], halfWavesX: 1, halfWavesY: 1 }] }],
    lamp: { darkVolts: 0.021, regimes },
    camera: {
      ...camera, bumps: [
        { atClipSeconds: clipSeconds(startOf(regimes, 3)), dxPixels: 0.36, dyPixels: -0.21 },
        { atClipSeconds: clipSeconds(startOf(regimes, 4)), dxPixels: 0, dyPixels: 0 },
      ],
    },
    record: { durationSeconds: 1.4 + 14.2, mainsVolts: 0.002, csv: { delimiter: ';', decimalComma: true, unitsRow: true } },
  })
}

/** When the reference of a repetition begins. */
function startOf(regimes: RegimeSpec[], repetition: number): number {
  return regimes.find(regime => regime.kind === 'reference' && regime.repetition === repetition)!.startSeconds
}

function discTake(seed: number, frequencyHz: number): Scenario {
  return defineScenario({
    seed, width: 256, height: 192, millimetresPerPixel: 0.36, scene: disc(400 + seed), camera,
    lines: [{ frequencyHz, forceNewtons: [1.9, 0.2], field: [{ ux: [0.1, 0.02], uy: [0, 0], halfWavesX: 2, halfWavesY: 1 }, { ux: [0, 0], uy: [0.1, 0.02], halfWavesX: 1, halfWavesY: 2 }] }],
    lamp: { darkVolts: 0.02, regimes: schedule(0.8, [{ frequencyHz, repetitions: 2 }], 0.9) },
    clock: { offsetSeconds: 0.44, driftPpm: 4 },
  })
}

export function demoTakes(): DemoTake[] {
  return [
    { key: 'untouched', campaign: 'cover', title: 'RC-4 lines 1 and 2', notes: 'First take of the morning, lamp warm for 20 minutes.', scenario: untouchedTake(), clipName: 'RC4_0107.mp4', recordName: 'rc4-take-07.csv' },
    { key: 'bumped', campaign: 'cover', title: 'RC-4 line 3, four repetitions', notes: 'Somebody leaned on the tripod during the third repetition; a fourth was added.', scenario: bumpedTake(), clipName: 'RC4_0109.mp4', recordName: 'rc4-take-09.csv' },
    { key: 'uploading', campaign: 'disc', title: 'PD-11 line 1', notes: 'Sent from the rig over the hall’s Wi-Fi.', scenario: discTake(43, 423.1), clipName: 'PD11_0003.mp4', recordName: 'pd11-take-03.csv' },
    { key: 'failed', campaign: 'disc', title: 'PD-11 line 2', notes: 'The camera’s battery ran out before it had closed the file.', scenario: discTake(44, 517.6), clipName: 'PD11_0004.mp4', recordName: 'pd11-take-04.csv' },
  ]
}
