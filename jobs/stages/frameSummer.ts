import type { FrameMeter } from '../imaging/accumulate'
import type { FrameSpan, SumTask } from '../imaging/sumPlan'
import { batchFrames, type LightKernel, type OpenSum } from '../kernels/lightKernel'

export interface SummerHooks<T extends FrameSpan, B extends FrameSpan> {
  /** The image of a base. */
  read: (base: B) => Promise<Uint32Array>
  /** A sum is complete. The image is good until the promise settles. */
  write: (task: SumTask<T, B>, image: Uint32Array) => Promise<void>
  /** Called for every frame, with its raw luma codes, when given; without it, frames are not measured. */
  meter?: (frame: number, meter: FrameMeter, bytes: Uint8Array) => void
}

/**
 * Carries out sum tasks on a stream of frames. Groups follow one another in a clip, so one or two images are in memory
 * at a time; frames go through the kernel eight at a time.
 *
 * For each frame, ascending: ask `slot(frame)` for the memory, read the frame into it, then await `push(frame)`.
 */
export class FrameSummer<T extends FrameSpan, B extends FrameSpan> {
  private readonly pending: SumTask<T, B>[]
  private readonly open = new Map<SumTask<T, B>, OpenSum>()
  private batch: number[] = []
  private batchKey = ''
  private plus: OpenSum[] = []
  private minus: OpenSum[] = []

  constructor(private readonly kernel: LightKernel, tasks: readonly SumTask<T, B>[], private readonly hooks: SummerHooks<T, B>) {
    this.pending = tasks.filter(task => task.parts.length > 0)
  }

  slot(frame: number): Uint8Array {
    if (this.batch.length && this.keyOf(frame) !== this.batchKey) this.flush()
    return this.kernel.slot(this.batch.length)
  }

  async push(frame: number): Promise<void> {
    await this.openUpTo(frame)
    if (!this.batch.length) this.begin(frame)
    this.batch.push(frame)
    const ending = [...this.open.keys()].filter(task => lastFrameOf(task) === frame)
    if (this.batch.length === batchFrames || ending.length) this.flush()
    for (const task of ending) await this.close(task)
  }

  /** @throws Error when a task still lacks frames */
  finish(): void {
    this.flush()
    if (this.open.size || this.pending.length) throw new Error('The frames ended before every sum was complete')
  }

  /** Which sums the frame belongs to, tasks that open with it included. */
  private keyOf(frame: number): string {
    const coming = this.pending[0]?.parts[0]?.firstFrame === frame ? `+${frame}` : ''
    return [...this.open].map(([task, { address }]) => `${address}:${signOf(task, frame)}`).join() + coming
  }

  private async openUpTo(frame: number): Promise<void> {
    while (this.pending[0] && this.pending[0].parts[0]!.firstFrame <= frame) {
      const task = this.pending.shift()!
      this.open.set(task, this.kernel.open(task.base ? await this.hooks.read(task.base) : undefined))
    }
  }

  private begin(frame: number): void {
    this.batchKey = this.keyOf(frame)
    const sums = (sign: number) => [...this.open].filter(([task]) => signOf(task, frame) === sign).map(([, sum]) => sum)
    this.plus = sums(1)
    this.minus = sums(-1)
  }

  private flush(): void {
    const count = this.batch.length
    if (!count) return
    if (this.plus.length || this.hooks.meter) {
      const meters = this.kernel.add(count, this.plus)
      if (this.hooks.meter) for (const [k, frame] of this.batch.entries()) this.hooks.meter(frame, meters[k]!, this.kernel.slot(k))
    }
    for (const sum of this.minus) this.kernel.subtract(count, sum)
    this.batch = []
  }

  private async close(task: SumTask<T, B>): Promise<void> {
    const sum = this.open.get(task)!
    await this.hooks.write(task, this.kernel.image(sum))
    this.open.delete(task)
    this.kernel.close(sum)
  }
}

function lastFrameOf({ parts }: SumTask<FrameSpan, FrameSpan>): number {
  const last = parts.at(-1)!
  return last.firstFrame + last.frameCount - 1
}

function signOf({ parts }: SumTask<FrameSpan, FrameSpan>, frame: number): number {
  return parts.find(({ firstFrame, frameCount }) => frame >= firstFrame && frame < firstFrame + frameCount)?.sign ?? 0
}
