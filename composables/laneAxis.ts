/** The time axis of the runner lanes: the last `hours`, with a tick on every whole hour (or quarter hour when short). */
export interface LaneAxis { fromMs: number, toMs: number, toShare: (timeMs: number) => number, ticksMs: number[] }

export function laneAxis(nowMs: number, oldestMs: number | null): LaneAxis {
  const minute = 60_000
  const age = oldestMs === null ? 0 : nowMs - oldestMs
  const [spanMinutes, tickMinutes] = ([[15, 3], [60, 10], [180, 30], [480, 60], [1440, 240]] as const).find(([span]) => age <= span * minute) ?? [1440, 240]
  const toMs = nowMs
  const fromMs = nowMs - spanMinutes * minute
  const step = tickMinutes * minute
  const ticksMs: number[] = []
  for (let tick = Math.ceil(fromMs / step) * step; tick <= toMs; tick += step) ticksMs.push(tick)
  return { fromMs, toMs, ticksMs, toShare: timeMs => Math.max(0, Math.min(1, (timeMs - fromMs) / (toMs - fromMs))) }
}
