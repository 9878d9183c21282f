import type { Group } from '../../shared/measurement'
import type { Situation } from '../queue/inputs'
import { StageError } from './stage'

/** The newest cut list: after the cut stage it is the one in force. */
export function cutListOf(situation: Situation): { version: number, alignmentVersion: number, groups: Group[] } {
  if (!situation.newestCutList) throw new StageError('output-missing', 'There is no cut list. Run the cut stage again.')
  return situation.newestCutList
}
