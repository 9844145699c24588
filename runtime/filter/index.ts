/** The filter: from readings, tick by tick, to state, forecasts and bounds; the same arithmetic on gateway and trainer. */

export { type Agreement, ALLOWANCE, disagreesWith, MOST_DIFFERENCE } from './agreement.ts';
export { FEATURE_LIMIT } from './bank.ts';
export { checkModel } from './check.ts';
export { type Crossing, crossing } from './crossing.ts';
export type { DrivenCore } from './driven.ts';
export type { DrivenModel } from './driven-model.ts';
export { DRIVEN_STATE_LIMIT, simulatedSignals, stepMembers } from './driven-step.ts';
export * from './errors.ts';
export { SUMMARY_LIMIT } from './featured.ts';
export { drawFeatures, scaledFeatures } from './featured-draw.ts';
export type { FeaturedModel } from './featured-model.ts';
export { forecastPath, predictNext } from './forecast.ts';
export { modelFromBundle } from './from-bundle.ts';
export { memberFeatures } from './from-features.ts';
export { sectionOf } from './from-switched.ts';
export { type Bounds, createBounds, intervalOf } from './interval.ts';
export type { Core } from './kernel.ts';
export { settlingTicksOf } from './kernels.ts';
export type { LinearCore } from './linear.ts';
export type { BankModel, CommonModel, DenseModel, LinearModel, Model, OwnCrossingMap } from './model.ts';
export { normalCdf, normalDensity, normalQuantile } from './normal-table.ts';
export * from './probe.ts';
export { type StuckGuard, standsStill } from './repeats.ts';
export { lookAtInput, ownFeatureCount, type ResponseModel } from './response.ts';
export type { Round } from './round.ts';
export { restoreBounds, restoreState, saveBounds, saveState } from './snapshot.ts';
export { createState, type FilterState, FOLDED, fadeTicks, MISSING, PASSED_OVER, STUCK } from './state.ts';
export {
  type CorrectionBuffers,
  createCorrection,
  summaryLength,
  writeCorrectionFeatures,
} from './switched-correction.ts';
export type { SwitchedModel } from './switched-model.ts';
export { createRollout, type Rollout, rollOut } from './switched-paths.ts';
export type { SwitchedCorrection, SwitchedSection } from './switched-section.ts';
export {
  createSwitchedCore,
  deriveSwitched,
  FLOOD_MEAN,
  LEAST_DOUBT,
  MOST_DOUBT,
  SWITCHED_BEND,
  SWITCHED_FEATURE_LIMIT,
  type SwitchedCore,
  stepSwitched,
} from './switched-step.ts';
export { trackBounds } from './tracking.ts';
export { catchUp, foldUnseen, update } from './update.ts';
