/** Wide rows: features, projections, frames, their running decomposition and what is condensed from them. */

export { learnCondenser, parts } from './condense-learn.ts';
export { scoreCondenser, stateSeries } from './condense-states.ts';
export { condenseSkill } from './condense-verdict.ts';
export type { FeatureMap } from './feature-map.ts';
export type { FrameChunk, FrameSource } from './frames.ts';
export { IncrementalSvd } from './incremental-svd.ts';
export { independentVariance, orthogonalVariance } from './kernel-error.ts';
export { medianWidth } from './kernel-width.ts';
export { OwnReadout } from './own-readout.ts';
export { predictiveState } from './predictive-state.ts';
export { joinRecordings, projectFrames } from './project-frames.ts';
export { createProjection, johnsonLindenstrauss, sparseProjection } from './projection.ts';
export { createFeatures, type FeatureKind } from './structured-features.ts';
export { WindowProjection } from './window-projection.ts';
