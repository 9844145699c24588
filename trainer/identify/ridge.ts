/**
 * The map from features to the future by ridge regression in two stages, from second moments alone: each signal from its
 * own past and the known inputs, then what that left from the past of all channels under a heavier penalty. The penalty
 * is relative to each feature's own variance, so units and scalings do not matter. Either stage may be left out, and its
 * penalty and features differ, by signal and group of steps.
 */
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';
import { multiply } from '../linalg/products.ts';
import type { Moments } from './moments.ts';
import type { StepGroup } from './step-groups.ts';
import { pickedRows, pickedSquare, usedRows } from './used-rows.ts';

/** Sizes of a set of moments. */
export interface Layout {
  readonly channelCount: number;
  readonly signalCount: number;
  /** Features a channel. */
  readonly featureCount: number;
  /** Future steps a signal. */
  readonly steps: number;
}

/** A diagonal entry below this share of the largest counts as this share, so that a silent feature is held at zero. */
const SILENT_SHARE = 1e-12;

/**
 * Features a signal's own stage may use: its own and those of the inputs.
 *
 * shapes  result ascending indices into p
 * units   none
 * throws  nothing
 * source  own choice: inputs are declared causes, so they are not left to the cross stage
 * cost    trivial
 */
export function ownFeatures(layout: Layout, signal: number): Int32Array {
  const channels = [signal];
  for (let c = layout.signalCount; c < layout.channelCount; c++) channels.push(c);
  const out = new Int32Array(channels.length * layout.featureCount);
  channels.forEach((c, k) => {
    for (let f = 0; f < layout.featureCount; f++) out[k * layout.featureCount + f] = c * layout.featureCount + f;
  });
  return out;
}

/**
 * Ridge map of one signal's future on a chosen set of features.
 *
 * shapes  chosen (n) feature indices; result (n × steps)
 * units   standardised change per feature
 * throws  TrainError 'fit' if the moments are not positive definite even with the penalty
 * source  Hoerl & Kennard, Technometrics 12 (1970), equation 2.1, with k times each feature's second moment
 * cost    O(n³ + n² steps)
 */
export function ridgeOwn(
  moments: Moments,
  layout: Layout,
  signal: number,
  chosen: Int32Array,
  penalty: number,
): Float64Array {
  const p = layout.channelCount * layout.featureCount;
  const width = layout.signalCount * layout.steps;
  const n = chosen.length;
  const gram = new Float64Array(n * n);
  const map = new Float64Array(n * layout.steps);
  for (let a = 0; a < n; a++) {
    for (let b = 0; b < n; b++) gram[a * n + b] = moments.features[chosen[a] * p + chosen[b]];
    const row = chosen[a] * width + signal * layout.steps;
    for (let h = 0; h < layout.steps; h++) map[a * layout.steps + h] = moments.future[row + h];
  }
  addPenalty(gram, n, penalty);
  solveCholesky(cholesky(gram, n), n, map, layout.steps);
  return map;
}

/** How one signal's map for a group of steps is learned: penalty, and the features of a channel that take part. */
export interface Cell {
  readonly penalty: number;
  /** Ascending indices within a channel. */
  readonly kept: readonly number[];
}

/** Cells of one stage, by signal and group of steps; null: the stage leaves these steps alone. */
export type Plan = readonly (readonly (Cell | null)[])[];

/** Both stages, and the groups their cells stand for. */
export interface TwoStagePlan {
  readonly groups: readonly StepGroup[];
  readonly own: Plan;
  readonly cross: Plan;
}

/**
 * Own-stage map of all signals, laid out over all features.
 *
 * shapes  plan (ny × groups), null: zeros, the signal keeps its last value; result (p × ny·steps)
 * units   standardised change per feature
 * throws  as `ridgeOwn`
 * source  as `ridgeOwn`
 * cost    one `ridgeOwn` a signal and distinct cell
 */
export function ownMap(moments: Moments, layout: Layout, groups: readonly StepGroup[], plan: Plan): Float64Array {
  const width = layout.signalCount * layout.steps;
  const out = new Float64Array(layout.channelCount * layout.featureCount * width);
  plan.forEach((cells, i) => {
    const present = new Map<string, Cell>();
    for (const cell of cells) if (cell !== null) present.set(cellKey(cell), cell);
    for (const [key, { penalty, kept }] of present) {
      const isKept = new Set(kept);
      const chosen = ownFeatures(layout, i).filter((f) => isKept.has(f % layout.featureCount));
      const map = ridgeOwn(moments, layout, i, chosen, penalty);
      for (const [g, { from, to }] of groups.entries()) {
        const cell = cells[g];
        if (cell === null || cellKey(cell) !== key) continue;
        chosen.forEach((f, a) => {
          const row = map.subarray(a * layout.steps + from - 1, a * layout.steps + to);
          out.set(row, f * width + i * layout.steps + from - 1);
        });
      }
    }
  });
  return out;
}

function cellKey({ penalty, kept }: Cell): string {
  return `${penalty} ${kept.join(' ')}`;
}

/**
 * What the own stage left: right-hand sides of the cross stage.
 *
 * shapes  own (p × ny·steps); result likewise
 * units   standardised; sums
 * throws  nothing
 * source  as `ridgeOwn`, on the residual: its cross moments are R - S own
 * cost    O(p F' steps) a signal, F' the features that its map uses
 */
export function leftByOwn(moments: Moments, layout: Layout, own: Float64Array): Float64Array {
  const p = layout.channelCount * layout.featureCount;
  const { signalCount, steps } = layout;
  const width = signalCount * steps;
  const left = moments.future.slice();
  for (let i = 0; i < signalCount; i++) {
    const used = usedRows(own, p, width, i * steps, (i + 1) * steps);
    const map = pickedRows(own, width, used, i * steps, (i + 1) * steps);
    const features = new Float64Array(p * used.length);
    for (let f = 0; f < p; f++) {
      for (let b = 0; b < used.length; b++) features[f * used.length + b] = moments.features[f * p + used[b]];
    }
    const right = multiply(features, map, p, used.length, steps);
    for (let f = 0; f < p; f++) {
      for (let h = 0; h < steps; h++) left[f * width + i * steps + h] -= right[f * steps + h];
    }
  }
  return left;
}

/** Features of all channels that a cell keeps, and the equations of the cross stage on them. */
export interface CrossSystem {
  /** (n) ascending indices into p */
  readonly chosen: Int32Array;
  /** (n × n) */
  readonly gram: Float64Array;
}

/**
 * The equations of the cross stage on some features of every channel, before their penalty.
 *
 * shapes  kept within a channel, ascending
 * units   sums
 * throws  nothing
 * source  a principal submatrix
 * cost    O(n²)
 */
export function crossSystem(moments: Moments, layout: Layout, kept: readonly number[]): CrossSystem {
  const p = layout.channelCount * layout.featureCount;
  const chosen = Int32Array.from({ length: layout.channelCount * kept.length }, (_, a) => {
    return Math.floor(a / kept.length) * layout.featureCount + kept[a % kept.length];
  });
  return { chosen, gram: pickedSquare(moments.features, p, chosen) };
}

/**
 * The cross stage for some columns.
 *
 * shapes  right (n × columns), overwritten with the map's rows of the chosen features
 * units   standardised change per feature
 * throws  as `ridgeOwn`
 * source  as `ridgeOwn`
 * cost    O(n³/6 + n² columns)
 */
export function solveCross({ chosen, gram }: CrossSystem, penalty: number, right: Float64Array, columns: number): void {
  const n = chosen.length;
  const raised = gram.slice();
  addPenalty(raised, n, penalty);
  solveCholesky(cholesky(raised, n), n, right, columns);
}

/**
 * The whole map: own stage, and the cross stage where the plan has one.
 *
 * shapes  result (p × ny·steps)
 * units   standardised change per feature
 * throws  as `ridgeOwn`
 * source  as `ridgeOwn`
 * cost    O(p³/6 + p² columns) a distinct cell of the cross stage
 */
export function twoStageMap(moments: Moments, layout: Layout, plan: TwoStagePlan): Float64Array {
  const map = ownMap(moments, layout, plan.groups, plan.own);
  const present = new Map<string, Cell>();
  for (const cell of plan.cross.flat()) if (cell !== null) present.set(cellKey(cell), cell);
  if (present.size === 0) return map;
  const width = layout.signalCount * layout.steps;
  const left = leftByOwn(moments, layout, map);
  for (const [key, { penalty, kept }] of present) {
    const columns = plan.cross.flatMap((cells, i) =>
      plan.groups.flatMap(({ from, to }, g) => {
        const cell = cells[g];
        if (cell === null || cellKey(cell) !== key) return [];
        return Array.from({ length: to - from + 1 }, (_, k) => i * layout.steps + from - 1 + k);
      }),
    );
    const system = crossSystem(moments, layout, kept);
    const right = new Float64Array(system.chosen.length * columns.length);
    system.chosen.forEach((f, a) => {
      columns.forEach((column, k) => {
        right[a * columns.length + k] = left[f * width + column];
      });
    });
    solveCross(system, penalty, right, columns.length);
    system.chosen.forEach((f, a) => {
      columns.forEach((column, k) => {
        map[f * width + column] += right[a * columns.length + k];
      });
    });
  }
  return map;
}

/**
 * Mean squared error of a map on a block, by moments alone: (E - 2 M·R + M'SM) / origins.
 *
 * shapes  map (p × ny·steps); result (ny·steps)
 * units   standardised²
 * throws  nothing
 * source  definition
 * cost    O(n² ny steps), n the features that the map uses
 */
export function mapError(moments: Moments, layout: Layout, map: Float64Array): Float64Array {
  const p = layout.channelCount * layout.featureCount;
  const width = layout.signalCount * layout.steps;
  const used = usedRows(map, p, width, 0, width);
  const n = used.length;
  const some = pickedRows(map, width, used, 0, width);
  const pushed = multiply(pickedSquare(moments.features, p, used), some, n, n, width);
  const out = moments.energy.slice();
  for (let a = 0; a < n; a++) {
    const row = used[a] * width;
    for (let k = 0; k < width; k++) {
      out[k] += some[a * width + k] * (pushed[a * width + k] - 2 * moments.future[row + k]);
    }
  }
  for (let k = 0; k < width; k++) out[k] = Math.max(0, out[k]) / moments.origins;
  return out;
}

/**
 * Moments with a ridge: a copy, each diagonal entry raised by a share of itself.
 *
 * shapes  gram (n × n); result likewise
 * units   any
 * throws  nothing
 * source  Hoerl & Kennard, Technometrics 12 (1970), with k times each second moment
 * cost    O(n²)
 */
export function penalised(gram: Float64Array, n: number, penalty: number): Float64Array {
  const out = gram.slice();
  addPenalty(out, n, penalty);
  return out;
}

function addPenalty(gram: Float64Array, n: number, penalty: number): void {
  let largest = 0;
  for (let a = 0; a < n; a++) largest = Math.max(largest, gram[a * n + a]);
  const floor = largest > 0 ? largest * SILENT_SHARE : 1;
  for (let a = 0; a < n; a++) gram[a * n + a] += Math.max(penalty * gram[a * n + a], floor);
}
