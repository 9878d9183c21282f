import { mkdirSync, mkdtempSync, rmSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { chromium, type Browser, type Page } from 'playwright-core'
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { startApplication, type Application } from '../support/application'
import { buildSchedule, defineScenario, renderScene } from '../support/forward'

let application: Application
let browser: Browser
let folder: string
let files: { clipPath: string, recordPath: string }
const problems: string[] = []
/** Set LAMPSUM_SCREENSHOTS to a folder to look at the pages afterwards. */
const shots = process.env.LAMPSUM_SCREENSHOTS

beforeAll(async () => {
  folder = mkdtempSync(join(tmpdir(), 'lampsum-browser-'))
  if (shots) mkdirSync(shots, { recursive: true })
  application = await startApplication()
  files = await renderScene(defineScenario({
    seed: 9, width: 192, height: 128, scene: { kind: 'disc', seed: 91, blurPixels: 1.6, contrast: 0.42 },
    camera: { lightPerVolt: 0.36, ambientVolts: 0.004, frameRate: { numerator: 50, denominator: 1 }, exposureSeconds: 0.02 },
    lines: [{ frequencyHz: 318.4, forceNewtons: [2, 0], field: [{ ux: [0.12, 0], uy: [0, 0.06], halfWavesX: 2 }] }],
    lamp: { darkVolts: 0.02, regimes: buildSchedule({ startSeconds: 0.7, lines: [{ frequencyHz: 318.4, repetitions: 2 }], darkSeconds: 0.5, referenceSeconds: 0.9, phaseSeconds: 1, levelVolts: 2.2, depth: 0.92, unevenness: 0.08 }) },
    clock: { offsetSeconds: 0.31, driftPpm: -8 },
  }), folder)
  browser = await chromium.launch({ executablePath: '/usr/bin/chromium', args: ['--no-sandbox', '--disable-gpu', '--disable-background-networking', '--disable-component-update', '--disable-sync', '--no-first-run'] })
}, 180_000)

afterAll(async () => {
  await browser?.close()
  await application?.stop()
  rmSync(folder, { recursive: true, force: true })
})

async function openAs(role: string): Promise<Page> {
  const page = await (await browser.newContext({ viewport: { width: 1280, height: 720 } })).newPage()
  page.on('pageerror', error => problems.push(`${page.url()}: ${error.message}`))
  page.on('console', message => message.type() === 'error' && problems.push(`${page.url()}: ${message.text()}`))
  await page.goto(`${application.url}/sign-in`, { waitUntil: 'load' })
  // Until the page is alive, a submitted form would be the browser's own.
  await until(page, 'document.querySelector("#__nuxt")?.__vue_app__')
  await page.getByLabel('E-mail').fill(`${role}@demo.lampsum.example`)
  await page.getByLabel('Password').fill(application.password)
  await page.keyboard.press('Enter')
  await page.waitForURL(url => !url.pathname.startsWith('/sign-in'))
  return page
}

/** Polls from outside: the content policy forbids the page to evaluate strings itself. */
async function until(page: Page, expression: string): Promise<void> {
  await expect.poll(() => page.evaluate(`Boolean(${expression})`), { timeout: 60_000, interval: 200 }).toBe(true)
}

const shot = async (page: Page, name: string) => shots ? page.screenshot({ path: join(shots, `${name}.png`) }) : undefined

describe('the same story in the browser', () => {
  it('a technician registers an acquisition, drops clip and record, and sees both proven', async () => {
    const page = await openAs('technician')
    await page.getByRole('link', { name: 'Intake' }).click()
    await page.getByRole('heading', { name: 'Register an acquisition' }).waitFor()
    await expect(page.getByText('photosensitive seizures').count()).resolves.toBeGreaterThan(0)
    await page.getByRole('button', { name: 'New…' }).click()
    await page.getByRole('dialog').getByLabel('Name').fill('Disc DK-5')
    await page.getByRole('dialog').locator('button[type=submit]').click()
    await page.getByRole('dialog').waitFor({ state: 'detached' })
    await page.getByLabel('Title').fill('first take')
    await shot(page, 'intake')
    await page.getByRole('button', { name: /^Register/ }).click()
    await page.waitForURL(/acquisition=/)
    await page.locator('input[type=file]').setInputFiles([files.clipPath, files.recordPath])
    await until(page, 'document.body.innerText.match(/[Ss]afe to close/)')
    await shot(page, 'uploaded')
    await page.context().close()
  })

  it('an analyst follows it to the frame set and reads a pixel', async () => {
    const page = await openAs('analyst')
    await page.getByRole('link', { name: 'Queue' }).click()
    await until(page, 'document.body.innerText.includes("1 frame set ready")')
    await shot(page, 'queue')
    await page.getByRole('link', { name: /first take/ }).first().click()
    await page.getByRole('link', { name: 'Open the frame set' }).click()
    await page.getByRole('heading', { name: /Frame set of 318/ }).waitFor()
    const canvas = page.locator('canvas').first()
    await canvas.waitFor()
    await until(page, `(() => { const c = document.querySelector('canvas'); const d = c.getContext('2d')?.getImageData(0, 0, c.width, c.height).data; return d && new Set(d).size > 20 })()`)
    await page.getByRole('application').click({ position: { x: 300, y: 200 } })
    await until(page, '!document.body.innerText.includes("click the image")')
    await shot(page, 'frame-set')
    await page.context().close()
  })

  it('every page of the navigation opens for an admin, without an error in the console', async () => {
    const page = await openAs('admin')
    for (const path of ['/', '/campaigns', '/intake', '/queue', '/admin/people', '/admin/mails', '/account']) {
      const answer = await page.goto(`${application.url}${path}`, { waitUntil: 'load' })
      expect(answer!.status(), path).toBe(200)
      await page.locator('h1').first().waitFor()
      await shot(page, `admin${path.replaceAll('/', '-')}`)
    }
    await page.context().close()
    expect(problems).toEqual([])
  })
})
