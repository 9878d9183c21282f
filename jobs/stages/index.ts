import type { PipelineStage } from '../../shared/states'
import type { StageDefinition } from './stage'
import { align } from './align'
import { check } from './check'
import { cut } from './cut'
import { inspect } from './inspect'
import { meter } from './meter'
import { record } from './record'
import { sum } from './sum'

/** The file of a stage bears the stage's name; here they are gathered for runner and worker thread. */
export const stageDefinitions = { inspect, meter, record, align, cut, sum, check } as unknown as Record<PipelineStage, StageDefinition>
