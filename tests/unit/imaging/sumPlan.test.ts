import { describe, expect, it } from 'vitest'
import { framesNeeded, planSums, type FrameSpan } from '../../../jobs/imaging/sumPlan'
import { random } from './pictures'

const span = (firstFrame: number, frameCount: number): FrameSpan => ({ firstFrame, frameCount })

/** How often each frame is counted once a task has been carried out. */
function counted({ base, parts }: ReturnType<typeof planSums>[number], frames: number): number[] {
  const counts = Array<number>(frames).fill(0)
  for (const { firstFrame, frameCount, sign } of [...base ? [{ ...base, sign: 1 }] : [], ...parts]) {
    for (let frame = firstFrame; frame < firstFrame + frameCount; frame++) counts[frame]! += sign
  }
  return counts
}

const truth = (target: FrameSpan, frames: number) => Array.from({ length: frames }, (_, frame) => Number(frame >= target.firstFrame && frame < target.firstFrame + target.frameCount))

describe('the plan of sums', () => {
  it('adds everything when there is nothing to build upon', () => {
    expect(planSums([span(10, 5)], [])).toEqual([{ target: span(10, 5), base: null, parts: [{ firstFrame: 10, frameCount: 5, sign: 1 }] }])
  })

  it('needs nothing for a sum that is there', () => {
    expect(planSums([span(10, 5)], [span(0, 4), span(10, 5)])).toEqual([{ target: span(10, 5), base: span(10, 5), parts: [] }])
  })

  it('touches only the frames that changed sides', () => {
    const [task] = planSums([span(12, 100)], [span(10, 99)])
    expect(task!.parts).toEqual([{ firstFrame: 10, frameCount: 2, sign: -1 }, { firstFrame: 109, frameCount: 3, sign: 1 }])
  })

  it('starts anew when that is less work', () => {
    expect(planSums([span(0, 10)], [span(8, 100)])[0]!.base).toBeNull()
  })

  it('counts every frame of a target once and no other, for 500 random edits', () => {
    const next = random(4)
    const whole = (below: number) => Math.floor(next() * below)
    for (let trial = 0; trial < 500; trial++) {
      const some = () => Array.from({ length: 1 + whole(4) }, () => span(whole(60), 1 + whole(40)))
      const targets = some()
      const tasks = planSums(targets, some())
      expect(tasks).toHaveLength(targets.length)
      for (const task of tasks) expect(counted(task, 100)).toEqual(truth(task.target, 100))
      const needed = framesNeeded(tasks).flatMap(({ firstFrame, frameCount }) => Array.from({ length: frameCount }, (_, k) => firstFrame + k))
      expect(needed).toEqual([...new Set(tasks.flatMap(({ parts }) => parts.flatMap(({ firstFrame, frameCount }) => Array.from({ length: frameCount }, (_, k) => firstFrame + k))))].sort((a, b) => a - b))
      const starts = tasks.map(task => task.parts[0]?.firstFrame ?? -1)
      expect(starts).toEqual([...starts].sort((a, b) => a - b))
    }
  })

  it('leaves out empty groups', () => {
    expect(planSums([span(5, 0)], [])).toEqual([])
  })
})
