/** A window over `count` frames: zoom and move, never outside, never narrower than `smallest`. */
export interface FrameWindow { from: number, to: number }

export function zoomWindow(window: FrameWindow, count: number, factor: number, centre = (window.from + window.to) / 2, smallest = 20): FrameWindow {
  const span = Math.min(count, Math.max(Math.min(smallest, count), Math.round((window.to - window.from) * factor)))
  const share = (centre - window.from) / Math.max(1, window.to - window.from)
  return clampWindow({ from: Math.round(centre - span * share), to: Math.round(centre - span * share) + span }, count)
}

export function moveWindow(window: FrameWindow, count: number, share: number): FrameWindow {
  const step = Math.round((window.to - window.from) * share)
  return clampWindow({ from: window.from + step, to: window.to + step }, count)
}

function clampWindow({ from, to }: FrameWindow, count: number): FrameWindow {
  const span = Math.min(count, to - from)
  const start = Math.max(0, Math.min(count - span, from))
  return { from: start, to: start + span }
}

/**
 * Where predicted light comes to lie, in frames, when offset and drift are typed but not accepted yet. The prediction
 * at record time r belongs to clip time (r − offset)/(1 + drift).
 */
export function shiftedFrame(frame: number, frameRateHz: number, old: { offsetSeconds: number, driftPpm: number }, typed: { offsetSeconds: number, driftPpm: number }): number {
  const recordSeconds = old.offsetSeconds + (1 + old.driftPpm * 1e-6) * frame / frameRateHz
  return (recordSeconds - typed.offsetSeconds) / (1 + typed.driftPpm * 1e-6) * frameRateHz
}
