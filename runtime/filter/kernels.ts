/** The kernel of every kind. */
import { denseKernel } from './dense-recursion.ts';
import { drivenKernel } from './driven.ts';
import { featuredKernel } from './featured.ts';
import type { Core, Kernel } from './kernel.ts';
import { linearKernel } from './linear.ts';
import type { Model } from './model.ts';
import { switchedKernel } from './switched.ts';

type AnyKernel = Kernel<Model, Core>;

const KERNELS: Readonly<Record<Model['kind'], AnyKernel>> = {
  linear: linearKernel as unknown as AnyKernel,
  dense: denseKernel as unknown as AnyKernel,
  featured: featuredKernel as unknown as AnyKernel,
  switched: switchedKernel as unknown as AnyKernel,
  driven: drivenKernel as unknown as AnyKernel,
};

/** The kernel of a model; it takes only models and cores of that kind. */
export function kernelOf(model: Model): AnyKernel {
  return KERNELS[model.kind];
}

/**
 * Ticks until the start of a run no longer shows: how long a filter is warmed up on history.
 *
 * units   ticks
 */
export function settlingTicksOf(model: Model): number {
  return kernelOf(model).settlingTicks(model) + (model.round?.ticks ?? 0);
}
