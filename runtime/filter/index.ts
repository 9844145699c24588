/** The filter: from readings, tick by tick, to state, forecasts and bounds; the same arithmetic on gateway and trainer. */
export { FEATURE_LIMIT } from './bank.ts';
export { checkModel } from './check.ts';
export { type Crossing, crossing } from './crossing.ts';
export * from './errors.ts';
export { forecastPath, predictNext } from './forecast.ts';
export { modelFromBundle } from './from-bundle.ts';
export { type Bounds, createBounds, intervalOf } from './interval.ts';
export type { Core } from './kernel.ts';
export { settlingTicksOf } from './kernels.ts';
export type { LinearCore } from './linear.ts';
export type { BankModel, CommonModel, LinearModel, Model } from './model.ts';
export { normalCdf, normalDensity, normalQuantile } from './normal-table.ts';
export * from './probe.ts';
export { restoreBounds, restoreState, saveBounds, saveState } from './snapshot.ts';
export { createState, type FilterState, FOLDED, MISSING, PASSED_OVER } from './state.ts';
export { trackBounds } from './tracking.ts';
export { update } from './update.ts';
