import type { Acquisition, CameraProfile } from '#shared/schemas/campaigns'
import type { CodeRange, Transfer } from '#shared/measurement'

export interface PlanRow { key: number, frequencyHz: number | null, repetitions: number | null }
export interface AcquisitionForm {
  campaignId: string
  title: string
  notes: string
  cameraProfileId: string
  frameExposureSeconds: number | null
  transfer: Transfer
  range: CodeRange
  millimetresPerPixel: number | null
  plan: PlanRow[]
  guardMilliseconds: number | null
  autoRun: boolean
  /** As typed: left, top, width, height. */
  lampPatch: string
}

let nextKey = 0
export const planRow = (frequencyHz: number | null = null, repetitions: number | null = null): PlanRow => ({ key: ++nextKey, frequencyHz, repetitions })

export const emptyForm = (campaignId = ''): AcquisitionForm => ({
  campaignId, title: '', notes: '', cameraProfileId: '', frameExposureSeconds: null, transfer: 'auto', range: 'auto',
  millimetresPerPixel: null, plan: [], guardMilliseconds: 1, autoRun: true, lampPatch: '',
})

type Settings = Pick<Acquisition, 'cameraProfileId' | 'frameExposureSeconds' | 'transfer' | 'range' | 'millimetresPerPixel' | 'guardSeconds' | 'autoRun' | 'lampPatch'>

/** The settings of an acquisition as the form shows them; title, notes and plan are taken by the edit form only. */
export const settingsOf = (from: Settings) => ({
  cameraProfileId: from.cameraProfileId ?? '', frameExposureSeconds: from.frameExposureSeconds, transfer: from.transfer, range: from.range,
  millimetresPerPixel: from.millimetresPerPixel, guardMilliseconds: Number((from.guardSeconds * 1000).toPrecision(9)), autoRun: from.autoRun,
  lampPatch: from.lampPatch ? [from.lampPatch.left, from.lampPatch.top, from.lampPatch.width, from.lampPatch.height].join(', ') : '',
})
export const profileValues = (profile: CameraProfile) => ({
  frameExposureSeconds: profile.frameExposureSeconds, transfer: profile.transfer, range: profile.range, millimetresPerPixel: profile.millimetresPerPixel,
})
export const formOf = (acquisition: Acquisition): AcquisitionForm => ({
  campaignId: acquisition.campaignId, title: acquisition.title, notes: acquisition.notes ?? '', ...settingsOf(acquisition),
  plan: acquisition.plan.map(line => planRow(line.frequencyHz, line.repetitions ?? null)),
})

/** What the API wants. Rows left wholly empty are no lines. */
export function bodyOf(form: AcquisitionForm) {
  const { plan, guardMilliseconds, cameraProfileId, lampPatch, ...rest } = form
  return {
    ...rest,
    cameraProfileId: cameraProfileId || null,
    guardSeconds: (guardMilliseconds ?? 1) / 1000,
    lampPatch: patchOf(lampPatch),
    plan: plan.filter(row => row.frequencyHz !== null || row.repetitions !== null).map(row => ({ frequencyHz: row.frequencyHz, ...(row.repetitions !== null && { repetitions: row.repetitions }) })),
  }
}

/** Four whole numbers as people type them; null for nothing. What is no rectangle goes to the API as it is, which says so. */
function patchOf(text: string): { left: number, top: number, width: number, height: number } | string | null {
  const numbers = text.trim().split(/[\s,;]+/).filter(Boolean).map(Number)
  if (!numbers.length) return null
  const [left, top, width, height] = numbers
  return numbers.length === 4 && numbers.every(Number.isInteger) ? { left: left!, top: top!, width: width!, height: height! } : text
}

/** The first message about the lamp patch, from fields such as `lampPatch.width`. */
export const patchError = (fields: Record<string, string>): string | undefined => Object.entries(fields).find(([name]) => name === 'lampPatch' || name.startsWith('lampPatch.'))?.[1]

/** The first message about the plan, with the line it stands on, from fields such as `plan.2.frequencyHz`. */
export function planError(fields: Record<string, string>): string | undefined {
  const [path, message] = Object.entries(fields).find(([name]) => name === 'plan' || name.startsWith('plan.')) ?? []
  if (!path) return undefined
  const line = /^plan\.(\d+)/.exec(path)?.[1]
  return line === undefined ? message : `Line ${Number(line) + 1}: ${message}`
}

export const transferOptions: { value: Transfer, label: string }[] = [
  { value: 'auto', label: 'As the clip states' },
  { value: 'bt709', label: 'BT.709' },
  { value: 'srgb', label: 'sRGB' },
  { value: 'gamma22', label: 'Gamma 2.2' },
  { value: 'linear', label: 'Linear light' },
]
export const rangeOptions: { value: CodeRange, label: string }[] = [
  { value: 'auto', label: 'As the clip states' },
  { value: 'limited', label: 'Limited (16–235)' },
  { value: 'full', label: 'Full (0–255)' },
]
