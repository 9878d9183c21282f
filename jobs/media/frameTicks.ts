/**
 * Filter that writes a line for every frame, with its tick, before the frame itself is written. ffmpeg's `metadata`
 * prints only frames that bear metadata, so each is given some.
 */
export const ticksFilter = 'metadata=mode=add:key=n:value=0,metadata=mode=print:file=pipe\\\\:3:direct=1'

/** Ticks of the frames that ffmpeg writes, as the ticks filter tells them. */
export class FrameTicks {
  /** The filter counts anew when the picture's size or format changes. */
  restarted = false
  private readonly ticks: number[] = []
  private partial = ''
  private ended = false
  private waiting: (() => void) | undefined

  readonly add = (text: string): void => {
    const lines = (this.partial + text).split('\n')
    this.partial = lines.pop()!
    for (const line of lines) {
      const [, count, tick] = /^frame:(\d+)\s+pts:(\S+)/.exec(line) ?? []
      if (count === undefined) continue
      if (Number(count) !== this.ticks.length) this.restarted = true
      this.ticks.push(Number(tick))
    }
    this.wake()
  }

  readonly end = (): void => {
    this.ended = true
    this.wake()
  }

  /** The tick of the frame that came out as number `index`; NaN when it has none, undefined when the stream has ended. */
  async of(index: number): Promise<number | undefined> {
    while (index >= this.ticks.length && !this.ended) await new Promise<void>(settle => this.waiting = settle)
    return this.ticks[index]
  }

  private wake(): void {
    this.waiting?.()
    this.waiting = undefined
  }
}
