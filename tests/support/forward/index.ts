/**
 * The forward model: what camera and data acquisition would have recorded of a specimen that is known exactly.
 * It is the judge of the pipeline and shares no code with it.
 */
export { classifyFrames, groupFits, groupTruths } from './classify'
export type { FrameClass, FrameTruth, GroupTruth } from './classify'
export { defineScenario } from './scenario'
export type { Bump, LineSpec, RegimeSpec, Scenario, ScenarioInput } from './scenario'
export { buildSchedule } from './schedule'
export { frameIntegrals, frameWindow, groupIntegrals, makeTimeline } from './timeline'
export type { Integrals, Timeline } from './timeline'
export { FrameRenderer } from './frames'
export { codeScale, decodeSignal, encodeLight, lightOfCode } from './camera'
export { fieldAt } from './modeField'
export type { ModeTerm } from './modeField'
export type { SceneSpec } from './scene'
export { recordSamples, writeRecordCsv } from './record'
export { lineImages } from './truth'
export type { LineImages, Truth } from './truth'
export { renderLuma, renderScene } from './render'
export type { RenderedScene } from './render'
