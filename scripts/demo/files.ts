import { rename, rm, stat, truncate } from 'node:fs/promises'
import { join } from 'node:path'
import { renderScene } from '../../tests/support/forward'
import { demoCampaigns, demoTakes, type DemoCampaign, type DemoTake } from './scenarios'

export interface DemoFile {
  kind: 'clip' | 'record'
  path: string
  filename: string
  /** How much of it the demo uploads before it stops, 0 to 1. */
  uploadShare: number
}

export interface DemoAcquisition {
  key: DemoTake['key']
  campaign: DemoCampaign['key']
  title: string
  notes: string
  frameExposureSeconds: number
  transfer: 'bt709' | 'srgb' | 'linear' | 'gamma22'
  range: 'limited' | 'full'
  millimetresPerPixel: number
  plan: { frequencyHz: number, repetitions: number }[]
  files: DemoFile[]
}

export interface DemoFiles { campaigns: DemoCampaign[], acquisitions: DemoAcquisition[] }

/** Makes the clips and records of all demo takes in `outDir`, one after another. */
export async function makeDemoFiles(outDir: string): Promise<DemoFiles> {
  const acquisitions: DemoAcquisition[] = []
  for (const take of demoTakes()) acquisitions.push({ ...describe(take), files: await makeFiles(take, outDir) })
  return { campaigns: demoCampaigns, acquisitions }
}

/** What a technician would type when registering the take. */
export function describe({ key, campaign, title, notes, scenario }: DemoTake): Omit<DemoAcquisition, 'files'> {
  const { camera, lamp, lines, millimetresPerPixel } = scenario
  return {
    key, campaign, title, notes, millimetresPerPixel,
    frameExposureSeconds: camera.exposureSeconds, transfer: camera.transfer, range: camera.range,
    plan: lines.map(({ frequencyHz }, index) => ({
      frequencyHz,
      repetitions: lamp.regimes.filter(regime => regime.kind === 'reference' && regime.line === index + 1).length,
    })),
  }
}

async function makeFiles(take: DemoTake, outDir: string): Promise<DemoFile[]> {
  const made = await renderScene(take.scenario, outDir, take.key)
  await rm(made.truthPath)
  const clip = join(outDir, take.clipName)
  await rename(made.clipPath, clip)
  if (take.key === 'failed') await truncate(clip, Math.floor(0.7 * (await stat(clip)).size))
  const files: DemoFile[] = [{ kind: 'clip', path: clip, filename: take.clipName, uploadShare: take.key === 'uploading' ? 0.6 : 1 }]
  if (!take.recordName) {
    await rm(made.recordPath)
    return files
  }
  const record = join(outDir, take.recordName)
  await rename(made.recordPath, record)
  return [...files, { kind: 'record', path: record, filename: take.recordName, uploadShare: 1 }]
}
