// Plain JavaScript on purpose: this runs on a fresh machine, before any package is installed.
// It installs what is missing from Debian and npm, then hands over to scripts/<command>.ts.
import { execFileSync, spawn, spawnSync } from 'node:child_process'
import { createHash } from 'node:crypto'
import { existsSync, readFileSync, writeFileSync } from 'node:fs'
import { dirname, join } from 'node:path'
import process from 'node:process'
import { fileURLToPath } from 'node:url'

const root = join(dirname(fileURLToPath(import.meta.url)), '..')
const command = process.argv[2] ?? 'start'

const has = program => spawnSync('sh', ['-c', `command -v ${program}`], { env: { ...process.env, PATH: `${process.env.PATH}:/usr/sbin:/sbin` } }).status === 0
const python = modules => spawnSync('/usr/bin/python3', ['-c', `import ${modules}`]).status === 0

const needs = [
  { package: 'ffmpeg', present: () => has('ffmpeg') && has('ffprobe') },
  { package: 'mariadb-server-core', present: () => has('mariadbd') && has('mariadb-install-db') },
  ...(command === 'test'
    ? [
        { package: 'chromium', present: () => has('chromium') },
        { package: 'fonts-dejavu-core', present: () => existsSync('/usr/share/fonts/truetype/dejavu') },
        { package: 'python3-numpy', present: () => python('numpy') },
        { package: 'python3-scipy', present: () => python('scipy') },
        { package: 'python3-opencv', present: () => python('cv2') },
        { package: 'curl', present: () => has('curl') },
      ]
    : []),
]

function stop(message) {
  console.error(`\n${message}`)
  process.exit(1)
}

function installDebianPackages() {
  const missing = needs.filter(need => !need.present()).map(need => need.package)
  if (!missing.length) return
  const install = `apt-get install --no-install-recommends ${missing.join(' ')}`
  if (process.getuid?.() !== 0) stop(`These Debian packages are missing: ${missing.join(', ')}. Install them with\n    sudo ${install}\nand start again.`)
  console.log(`Installing from Debian: ${missing.join(', ')}`)
  const env = { ...process.env, DEBIAN_FRONTEND: 'noninteractive' }
  try {
    execFileSync('apt-get', ['update', '-qq'], { env, stdio: ['ignore', 'ignore', 'inherit'] })
    execFileSync('apt-get', ['install', '-y', '-qq', '--no-install-recommends', ...missing], { env, stdio: ['ignore', 'ignore', 'inherit'] })
  } catch {
    stop(`Debian's packages could not be installed. Check the network and free disk space, then try\n    ${install}`)
  }
  const still = needs.filter(need => !need.present()).map(need => need.package)
  if (still.length) stop(`Still missing after the installation: ${still.join(', ')}. Install them by hand and start again.`)
}

function installNpmPackages() {
  const stamp = join(root, 'node_modules', '.lampsum-lock')
  const lock = createHash('sha256').update(readFileSync(join(root, 'package-lock.json'))).digest('hex')
  if (existsSync(stamp) && readFileSync(stamp, 'utf8').trim() === lock) return
  console.log('Installing the npm packages of package-lock.json')
  const result = spawnSync('npm', ['ci', '--no-audit', '--no-fund', '--loglevel=error'], { cwd: root, stdio: ['ignore', 'ignore', 'inherit'] })
  if (result.status !== 0) stop('The npm packages could not be installed. Check the network and free disk space, then run “npm ci” and start again.')
  writeFileSync(stamp, lock)
}

const [major, minor] = process.versions.node.split('.').map(Number)
if (major < 20 || (major === 20 && minor < 15)) stop(`Node ${process.versions.node} is too old. Install Node 20.15 or a newer 20.x.`)
installDebianPackages()
installNpmPackages()

const child = spawn(process.execPath, ['--import', 'tsx', join(root, 'scripts', `${command}.ts`), ...process.argv.slice(3)], { cwd: root, stdio: 'inherit' })
for (const signal of ['SIGINT', 'SIGTERM', 'SIGHUP']) process.on(signal, () => child.kill(signal))
child.on('exit', (code, signal) => process.exit(signal ? 1 : code ?? 1))
