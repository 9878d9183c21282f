import { execFile, spawn } from 'node:child_process'
import { closeSync, constants, openSync } from 'node:fs'
import { mkdtemp, rm } from 'node:fs/promises'
import { Socket, type OnReadOpts, type SocketConstructorOpts } from 'node:net'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { promisify } from 'node:util'
import { MediaError } from './mediaError'

const run = promisify(execFile)

/** Linux lets every user have pipes this big (pipe(7), /proc/sys/fs/pipe-max-size); a new one holds 64 KiB. */
const pipeBytes = 1 << 20
/** F_SETPIPE_SZ of fcntl(2). Node cannot call it; perl-base is on every Debian. */
const enlarge = `fcntl(STDIN, 1031, ${pipeBytes})`

/**
 * A kernel pipe from a child process into memory of the caller's choice. What Node gives a child as standard output is a
 * pair of sockets, read in pieces of 64 KiB of fresh memory each: for raw video that takes a quarter longer.
 */
export class PixelPipe {
  /** Since when bytes are waited for; null while the reader holds them up. */
  private waitingSince: number | null = null

  private constructor(
    /** File descriptor for the child's standard output; to be closed here once the child has it. */
    readonly writeEnd: number,
    private readonly readEnd: number,
  ) {}

  static async open(): Promise<PixelPipe> {
    const folder = await mkdtemp(join(tmpdir(), 'lampsum-pipe-'))
    try {
      const path = join(folder, 'pixels')
      await run('mkfifo', ['-m', '600', path])
      // Opened for both directions first, a named pipe waits for nobody.
      const writeEnd = openSync(path, constants.O_RDWR)
      await enlargePipe(writeEnd)
      return new PixelPipe(writeEnd, openSync(path, constants.O_RDONLY))
    } catch (cause) {
      throw new MediaError('pipe-failed', `No pipe for pixels can be made in ${tmpdir()}. Check that the folder can be written to.`, { cause })
    } finally {
      await rm(folder, { recursive: true, force: true })
    }
  }

  closeWriteEnd(): void {
    closeSync(this.writeEnd)
  }

  waitedSeconds(): number {
    return this.waitingSince === null ? 0 : (performance.now() - this.waitingSince) / 1000
  }

  /** Close a pipe that no child has got. */
  abandon(): void {
    closeSync(this.writeEnd)
    closeSync(this.readEnd)
  }

  /**
   * Read to the pipe's end. `filled` is told how many bytes came and answers whether to go on: a promise holds reading
   * up until it is settled, `false` ends it. `memory`, asked right after, says where the next bytes go (never empty).
   */
  read(memory: () => Uint8Array, filled: (bytes: number) => boolean | Promise<boolean>): Promise<void> {
    return new Promise((settle, reject) => {
      const wait = () => {
        this.waitingSince = performance.now()
        return true
      }
      const end = (error?: unknown) => {
        this.waitingSince = null
        socket.destroy()
        if (error) reject(error as Error)
        else settle()
      }
      const callback = (bytes: number) => {
        this.waitingSince = null
        try {
          const goOn = filled(bytes)
          if (goOn === true) return wait()
          if (goOn === false) end()
          else void goOn.then(more => more ? wait() && void socket.resume() : end(), end)
        } catch (error) {
          end(error)
        }
        return false
      }
      // Node's types know `onread` for connections only.
      const options: SocketConstructorOpts & { onread: OnReadOpts } = { fd: this.readEnd, readable: true, writable: false, onread: { buffer: memory, callback } }
      const socket: Socket = new Socket(options)
      socket.on('error', end).on('end', () => end()).on('close', () => end())
      wait()
      socket.resume()
    })
  }
}

/** Without perl the pipe stays small, which costs a little time and nothing else. */
function enlargePipe(descriptor: number): Promise<void> {
  return new Promise((settle) => {
    spawn('perl', ['-e', enlarge], { stdio: [descriptor, 'ignore', 'ignore'] }).once('error', () => settle()).once('close', () => settle())
  })
}
