import { alignFigures } from '../../tests/support/figures/alignFigures'
import { cutFigures } from '../../tests/support/figures/cutFigures'
import { glanceFigures } from '../../tests/support/figures/glanceFigures'
import { lossFigures } from '../../tests/support/figures/lossFigures'
import { solveFigures } from '../../tests/support/figures/solveFigures'
import { heading, row } from './report'

/** Accuracy on seeded truth of the forward model, which shares no code with the pipeline. The named reference tests assert the same figures. */
export async function printFigures(): Promise<void> {
  heading('Alignment, 100 takes of 20 s and more, every frame’s light')
  const align = alignFigures(100)
  row('worst offset error, frames', align.worstOffsetFrames, '≤ 0.01')
  row('median offset error, frames', align.medianOffsetFrames, '')
  row('worst drift error, ppm', align.worstDriftPpm, '≤ 3')
  row('cases that miss and do not say so', align.silent, '= 0', `${align.unsure} ask for a person`)

  heading('Alignment, 100 takes of 60 s and more, at a glance')
  const glance = glanceFigures(100)
  row('worst offset error of the sure ones, frames', glance.worstOffsetFrames, '≤ 0.05')
  row('cases that miss and do not say so', glance.silent, '= 0', `${glance.unsure} have every frame measured first`)

  heading('Frames lost in mid-clip, 60 takes')
  const loss = lossFigures(60, seed => seed % 3)
  row('losses found, of those made', loss.found / loss.made, '')
  row('losses invented', loss.invented, '= 0')
  row('cases that miss and do not say so', loss.silent, '= 0', `${loss.unsure} ask for a person`)

  heading('Cut, 100 schedules')
  const cut = cutFigures(100)
  row('frames in a wrong group', cut.wrongFrames, '= 0')
  row('edge frames used', cut.edgeFrames, '= 0')
  row('groups missing', cut.missingGroups, '= 0', `of ${cut.groups}`)
  row('least share of a group’s usable frames that is used', cut.leastUsedShare, '≥ 0.9')
  row('worst frequency error, Hz', cut.worstFrequencyHz, '≤ 0.01')
  row('worst lamp phase error, °', cut.worstPhaseDeg, '≤ 0.2', `about the record’s first sample ${cut.worstPhaseAtZeroDeg.toFixed(3)}`)
  row('worst depth error', cut.worstDepth, '≤ 0.01')

  heading('Solve and check')
  const solve = solveFigures()
  row('least squares against numpy.linalg.lstsq, relative', solve.worstAgainstLstsq, '')
  row('worst camera motion error, px', solve.worstMotionPx, '≤ 0.01', `${solve.motionCases} known shifts; OpenCV: findTransformECC ${solve.worstEccPx.toFixed(4)}, phaseCorrelate ${solve.worstPhaseCorrelatePx.toFixed(4)}`)
  row('worst amplitude error of p and q', solve.worstAmplitude, '≤ 0.01', '8-bit codes with noise, no codec')
  row('worst phase error of p and q, °', solve.worstPhaseDeg, '≤ 0.5')
}
