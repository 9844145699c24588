/** What a fit will take: memory, time, bundle, factors, and what other ways of learning the same would have needed. */
import type { Site } from '@stillwell/protocol';
import { BUNDLE, BYTES, PROBE_SECONDS, SECONDS } from './constants.ts';
import { bundleWork, type CostOptions, type FitShape, fitShape, memoryWork, priced, timeWork } from './fit-work.ts';
import type { Extent } from './history-extent.ts';
import { covarianceOf, gramOf, type Matrix } from './matrix-size.ts';

/** The foreseen cost of a fit. */
export interface FitPrediction {
  readonly shape: FitShape;
  /** In memory whole, or what is older streamed past. */
  readonly way: 'in memory' | 'streamed';
  /** Peak of the resident memory. */
  readonly peakBytes: number;
  /** Where the linear kind wins; other kinds that are worth trying take longer. */
  readonly seconds: number;
  readonly bundleBytes: number;
  readonly maxBundleBytes: number;
  /** Null where the site has too many channels for any. */
  readonly factorsBytes: number | null;
  /** Of the widest bank's features. */
  readonly covariance: Matrix;
  /** Of the windows that end at each tick. */
  readonly gram: Matrix;
}

/** Options of the fit that change its cost. */
export interface PredictOptions extends CostOptions {
  /** Seconds of the probe on this machine. */
  readonly probe: number;
}

/** Foresees. */
export function predictFit(site: Site, extent: Extent, options: PredictOptions): FitPrediction {
  const shape = fitShape(site, extent, options);
  const features = shape.features * (shape.signals + shape.inputs);
  return {
    shape,
    way: shape.olderTicks > 0 ? 'streamed' : 'in memory',
    peakBytes: Math.round(priced(memoryWork(shape), BYTES)),
    seconds: priced(timeWork(shape), SECONDS) * (options.probe / PROBE_SECONDS),
    bundleBytes: Math.min(options.maxBytes, Math.round(priced(bundleWork(shape), BUNDLE))),
    maxBundleBytes: options.maxBytes,
    factorsBytes: shape.factorsBytes === 0 ? null : shape.factorsBytes,
    covariance: covarianceOf(features),
    gram: gramOf(extent.ticks),
  };
}
