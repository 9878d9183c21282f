/**
 * `npm run bench`: the figures that Lampsum promises, measured on seeded synthetic truth, and its speed as ratios within
 * this run. `npm run bench -- figures` or `-- speed` for one part; `--seconds=…` for a longer clip.
 */
import { execFileSync } from 'node:child_process'
import { parseArgs } from 'node:util'
import { printFigures } from './bench/figures'
import { measureSpeed } from './bench/speed'

const { positionals, values } = parseArgs({ allowPositionals: true, options: { 'seconds': { type: 'string', default: '60' }, 'keyframe-interval': { type: 'string', default: '50' } } })
const wanted = (part: string) => positionals.length === 0 || positionals.includes(part)

console.log(`Lampsum bench · ${execFileSync('ffmpeg', ['-version'], { encoding: 'utf8' }).split('\n')[0]} · Node ${process.version}`)
if (wanted('figures')) await printFigures()
if (wanted('speed')) await measureSpeed({ seconds: Number(values.seconds), keyframeInterval: Number(values['keyframe-interval']) })
