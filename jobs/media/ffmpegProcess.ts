import { spawn, type ChildProcess } from 'node:child_process'
import { resolve } from 'node:path'
import type { Readable } from 'node:stream'
import { MediaError } from './mediaError'
import { maximumPixels } from './pixelFormats'
import { PixelPipe } from './pixelPipe'
import { limitedCommand, type ProcessLimits } from './processLimits'

export { maximumPixels } from './pixelFormats'

/**
 * ffmpeg guesses a file's format from its content, and a playlist can name other files and addresses. Only these
 * demuxers may open an upload: none of them follows a reference out of the file.
 */
const demuxers = 'mov,matroska,avi,mpegts,mpeg,mxf'

const stderrTailBytes = 8192
const maximumErrorLines = 50

/** Options that go before an input, for ffprobe and ffmpeg alike. */
export const inputLimits = ['-protocol_whitelist', 'file', '-format_whitelist', demuxers, '-max_pixels', String(maximumPixels)]

/** An edit list can hide frames or repeat them; without it every stored frame is decoded once. Only this family knows the option. */
export const editListOptions = (container: string): string[] => container.split(',').includes('mov') ? ['-ignore_editlist', '1'] : []

/** As ffmpeg must be told, so that no file name is read as an option or as a protocol. */
export const inputFile = (path: string) => `file:${resolve(path)}`

export interface ProcessOptions {
  signal?: AbortSignal
  /** The process is ended after this long. */
  timeoutSeconds?: number
  /** The process is ended when no pixel comes for this long while they are waited for. */
  idleSeconds?: number
  limits?: ProcessLimits
  /** Takes standard output as text or bytes; the process is ended when it throws. Without it and `onPixels`, output is dropped. */
  onOutput?: (stdout: Readable) => Promise<void>
  /** Takes standard output instead where it is much; the process is ended when it throws or calls `stop`. */
  onPixels?: (pipe: PixelPipe, stop: () => void) => Promise<void>
  /** Takes file descriptor 3, for `-progress pipe:3`. */
  onSide?: (text: string) => void
  onSideEnd?: () => void
  /** Called with each line on standard error as it comes. */
  onErrorLine?: () => void
}

export interface ProcessResult {
  exitCode: number | null
  /** `onPixels` had enough. */
  stopped: boolean
  stderrTail: string
  /** Lines on standard error, the first 50. With `-v error` each is an error. */
  errorLines: string[]
}

/**
 * Run ffmpeg or ffprobe to its end. The process is gone when this settles, in every case.
 *
 * @throws the signal's reason when aborted, what `onOutput` threw, or MediaError `ffmpeg-missing`, `ffmpeg-timeout` or `ffmpeg-memory`;
 * a non-zero exit is not an error here, because only the caller can say what it means
 */
export async function runProcess(program: 'ffmpeg' | 'ffprobe', args: string[], { signal, timeoutSeconds, idleSeconds, limits, onOutput, onPixels, onSide, onSideEnd, onErrorLine }: ProcessOptions = {}): Promise<ProcessResult> {
  signal?.throwIfAborted()
  const pipe = onPixels && await PixelPipe.open()
  if (signal?.aborted) pipe?.abandon()
  signal?.throwIfAborted()
  const child = spawn(...limitedCommand(program, args, limits), { stdio: ['ignore', pipe ? pipe.writeEnd : onOutput ? 'pipe' : 'ignore', 'pipe', onSide ? 'pipe' : 'ignore'], windowsHide: true })
  pipe?.closeWriteEnd()
  const exited = exitOf(child, program)
  const kill = () => child.kill('SIGKILL')
  let timedOut: string | undefined
  const endFor = (reason: string) => {
    timedOut = reason
    kill()
  }
  let stopped = false
  const stop = () => {
    stopped = true
    kill()
  }
  const timer = timeoutSeconds === undefined ? undefined : setTimeout(() => endFor(`did not finish within ${timeoutSeconds} s`), timeoutSeconds * 1000)
  const watch = idleSeconds === undefined || !pipe ? undefined : setInterval(() => pipe.waitedSeconds() > idleSeconds && endFor(`gave no picture for ${idleSeconds} s`), 250 * idleSeconds)
  signal?.addEventListener('abort', kill, { once: true })
  const stderr = collectStderr(child.stderr!, onErrorLine)
  if (onSide) (child.stdio[3] as Readable).setEncoding('utf8').on('data', onSide).on('close', () => onSideEnd?.())
  try {
    // The exit is watched from the start, so that a missing program is not an unhandled rejection while output is read.
    const [exitCode] = await Promise.all([exited, pipe ? onPixels!(pipe, stop) : onOutput?.(child.stdout!)])
    signal?.throwIfAborted()
    if (timedOut) throw new MediaError('ffmpeg-timeout', `${program} ${timedOut}. The file may be damaged: export it again from the camera.`, { stderrTail: stderr.tail() })
    if (exitCode !== 0 && limits && !stopped) assertWithinLimits(program, child.signalCode, stderr.tail(), limits)
    return { exitCode, stopped, stderrTail: stderr.tail(), errorLines: stderr.lines }
  } catch (error) {
    signal?.throwIfAborted()
    throw error
  } finally {
    clearTimeout(timer)
    clearInterval(watch)
    signal?.removeEventListener('abort', kill)
    kill()
    await exited.catch(() => undefined)
  }
}

function assertWithinLimits(program: string, signalCode: NodeJS.Signals | null, stderrTail: string, { memoryBytes, cpuSeconds }: ProcessLimits): void {
  const details = { stderrTail }
  if (/^prlimit: failed to execute/m.test(stderrTail)) throw missing(program, details)
  // Where the soft limit is the hard one too, the kernel kills; SIGXCPU ffmpeg would take for a wish to end well.
  if (signalCode === 'SIGKILL' && cpuSeconds !== undefined) throw new MediaError('ffmpeg-timeout', `${program} was ended by the system: it used up its ${cpuSeconds} s of processor time, or the machine ran out of memory. The file may be damaged: export it again from the camera.`, details)
  if (/cannot allocate memory/i.test(stderrTail)) throw new MediaError('ffmpeg-memory', `${program} needs more than the ${Math.round(memoryBytes / 2 ** 20)} MiB of memory that a clip of this size may take. The file may be damaged: export it again from the camera.`, details)
}

const missing = (program: string, details: { stderrTail?: string, cause?: unknown }) => new MediaError('ffmpeg-missing', `${program} cannot be started. Install Debian’s package ffmpeg.`, details)

function exitOf(child: ChildProcess, program: string): Promise<number | null> {
  return new Promise((settle, reject) => {
    child.once('error', cause => reject(missing(program, { cause })))
    // `close` rather than `exit`: by then standard error has been read to its end.
    child.once('close', code => settle(code))
  })
}

function collectStderr(stream: Readable, onErrorLine?: () => void): { lines: string[], tail: () => string } {
  const lines: string[] = []
  let tail = ''
  let partial = ''
  stream.setEncoding('utf8')
  stream.on('data', (text: string) => {
    tail = (tail + text).slice(-stderrTailBytes)
    const parts = (partial + text).split('\n')
    partial = parts.pop()!.slice(-stderrTailBytes)
    for (const part of parts) keep(part)
  })
  stream.on('end', () => keep(partial))
  function keep(line: string) {
    if (!line.trim()) return
    if (lines.length < maximumErrorLines) lines.push(line.trim())
    onErrorLine?.()
  }
  return { lines, tail: () => tail }
}
