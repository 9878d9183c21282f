import { createReadStream } from 'node:fs'
import { mkdtemp, rm, stat, writeFile } from 'node:fs/promises'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { Upload } from 'tus-js-client'
import { makeDemoFiles, type DemoFile } from './demo/files'
import { run } from './lib/run'

/** Makes the demo once, as a technician would: through the HTTP interface, with real uploads. */
run(async () => {
  const base = required('LAMPSUM_DEMO_URL')
  const password = required('LAMPSUM_DEMO_PASSWORD')
  const marker = join(required('LAMPSUM_DATA_DIR'), 'run', 'demo-made')
  const folder = await mkdtemp(join(tmpdir(), 'lampsum-demo-'))
  try {
    const technician = await signIn(base, 'technician@demo.lampsum.example', password)
    const { campaigns, acquisitions } = await makeDemoFiles(folder)
    const campaignIds = new Map<string, string>()
    for (const { key, ...campaign } of campaigns) campaignIds.set(key, (await technician.post('/api/campaigns', campaign)).id)
    for (const { campaign, key: _key, files, ...acquisition } of acquisitions) {
      const { id } = await technician.post('/api/acquisitions', { ...acquisition, campaignId: campaignIds.get(campaign) })
      for (const file of files) await upload(base, technician.cookie, id, file)
    }
    await openToGuest(base, password, [...campaignIds.values()][0]!)
    await writeFile(marker, `${new Date().toISOString()}\n`)
    console.log('The demo is made.')
  } finally {
    await rm(folder, { recursive: true, force: true })
  }
})

function required(name: string): string {
  const value = process.env[name]
  if (!value) throw new Error(`${name} is not set; scripts/start.ts sets it.`)
  return value
}

async function signIn(base: string, email: string, password: string) {
  const response = await fetch(`${base}/api/auth/sign-in`, { method: 'POST', headers: { 'content-type': 'application/json' }, body: JSON.stringify({ email, password }) })
  if (!response.ok) throw new Error(`${email} could not sign in: ${await response.text()}`)
  const cookie = response.headers.getSetCookie().map(each => each.split(';')[0]).join('; ')
  const call = async (method: string, path: string, body?: unknown) => {
    const answer = await fetch(`${base}${path}`, { method, headers: { 'content-type': 'application/json', cookie }, body: body === undefined ? undefined : JSON.stringify(body) })
    if (!answer.ok) throw new Error(`${method} ${path}: ${await answer.text()}`)
    return await answer.json() as { id: string, items: { id: string, email: string }[], candidates: { userId: string, email: string }[] }
  }
  return { cookie, post: (path: string, body: unknown) => call('POST', path, body), get: (path: string) => call('GET', path) }
}

/** Uploads a file, or only its first part when the demo leaves it unfinished. */
async function upload(base: string, cookie: string, acquisitionId: string, { path, filename, kind, uploadShare }: DemoFile): Promise<void> {
  const bytes = (await stat(path)).size
  const stopAt = Math.floor(bytes * uploadShare)
  await new Promise<void>((resolve, reject) => {
    // A readable stream needs a chunk size of its own.
    const transfer = new Upload(createReadStream(path), {
      endpoint: `${base}/api/uploads`,
      chunkSize: uploadShare < 1 ? stopAt : 8 << 20,
      uploadSize: bytes,
      headers: { cookie },
      metadata: { filename, filetype: kind === 'clip' ? 'video/mp4' : 'text/csv', acquisitionId, kind },
      retryDelays: [0, 500, 2000],
      onChunkComplete: (_size, accepted) => {
        if (uploadShare < 1 && accepted >= stopAt) void transfer.abort().then(resolve, reject)
      },
      onSuccess: () => resolve(),
      onError: reject,
    })
    transfer.start()
  })
}

/** One campaign is open to the demo's guest, who sees what gets released there. */
async function openToGuest(base: string, password: string, campaignId: string): Promise<void> {
  const analyst = await signIn(base, 'analyst@demo.lampsum.example', password)
  const { candidates } = await analyst.get(`/api/campaigns/${campaignId}/guests`)
  const guest = candidates.find(candidate => candidate.email.startsWith('guest@'))
  if (guest) await analyst.post(`/api/campaigns/${campaignId}/guests`, { userId: guest.userId })
}
