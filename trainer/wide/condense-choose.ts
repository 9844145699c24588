/**
 * Which states a condenser keeps: how many are worth their place, and whether their forecasts are read out of the factors, with
 * the ridge of what was let go, or by exact regression in one more pass; both by the windows after those learned from. The
 * first shrinks what a short recording would overrate. The second is right on a long one: directions of the truncated factors
 * that are nearly all future hold a little past each, which within the factors seems to tell that future. Beside them stands the
 * regression on the states and each number's own newest value, which keeps what few states cannot carry, such as where in the
 * picture something is.
 */
import type { CondenserShape } from './condenser.ts';
import type { SvdFactors } from './incremental-svd.ts';
import { OwnReadout } from './own-readout.ts';
import type { PastFeatures } from './past-features.ts';
import { type JointLayout, type PredictiveState, predictiveState } from './predictive-state.ts';
import type { ProjectedFrames } from './projected-frames.ts';
import { ReadoutRegression } from './readout.ts';
import { clipRadius } from './spectral-clip.ts';
import { mapStates } from './state-map.ts';

/** Windows looked at. */
const SAMPLE = 1000;
/** States are added while they bring more than this part of what the best number of them brings. */
const WORTH = 0.005;

/** What there is to choose from: frames [0, learn) were learned from, [learn, choose) decide. */
export interface Choice {
  readonly frames: ProjectedFrames;
  readonly factors: SvdFactors;
  readonly layout: JointLayout;
  readonly past: PastFeatures;
  readonly shape: CondenserShape;
  readonly learn: number;
  readonly choose: number;
}

/** States, and what each number's own newest value adds to their forecasts. */
export interface ChosenStates extends PredictiveState {
  /** (horizon · numbers). */
  readonly own: Float64Array;
}

/** The states; `order` null: as many as pay, up to `mostStates`. */
export function chooseStates(
  choice: Choice,
  { order, mostStates }: { readonly order: number | null; readonly mostStates: number },
): ChosenStates {
  const within = predictiveState(choice.factors, choice.layout, order ?? mostStates);
  const exact = readOut(choice, within);
  const [gains, exactGains] = [gainsOf(choice, within), gainsOf(choice, exact)];
  const isExact = Math.max(...exactGains) >= Math.max(...gains);
  const told = isExact ? exactGains : gains;
  const learned = ownReadout(choice, within, 0, choice.learn, 1);
  const ownGains = ownGainsOf(choice, within, learned);
  const isOwn = Math.max(...ownGains) > Math.max(...told);
  const kept = Math.min(order ?? worthwhile(isOwn ? ownGains : told), within.order);
  const found = isExact
    ? readOut(choice, firstStates(within, kept))
    : predictiveState(choice.factors, choice.layout, kept);
  // What each state is worth as those windows have it: within the factors it would be flattered.
  const explained = told.slice(0, kept).map((gain, k) => gain - (k === 0 ? 0 : told[k - 1]));
  const { horizon, numbers } = choice.shape;
  if (!isOwn) return { ...found, explained, own: new Float64Array(horizon * numbers) };
  return { ...found, explained, ...learned.solve(kept) };
}

/** Regression on states and newest values over windows within [from, to). */
function ownReadout(
  { frames, past, shape }: Choice,
  state: PredictiveState,
  from: number,
  to: number,
  stride: number,
): OwnReadout {
  const { window, horizon, numbers } = shape;
  const readout = new OwnReadout(state.order, numbers, horizon);
  const phi = new Float64Array(past.length);
  const x = new Float64Array(state.order);
  frames.visit(
    window + horizon,
    from,
    to,
    (row) => {
      past.write(row, 0, phi);
      mapStates(state, phi, x);
      readout.add(x, row.subarray((window - 1) * numbers, window * numbers), row.subarray(window * numbers));
    },
    stride,
  );
  return readout;
}

/** As `gainsOf`, of states and newest values together. */
function ownGainsOf(choice: Choice, state: PredictiveState, learned: OwnReadout): Float64Array {
  const { learn, choose } = choice;
  const judge = ownReadout(choice, state, learn, choose, strideOf(choice));
  const energy = judge.energy;
  return Float64Array.from({ length: state.order }, (_, k) => {
    const error = judge.errorOf(learned.solve(k + 1), k + 1);
    return energy > 0 ? 1 - error / energy : 0;
  });
}

function strideOf({ learn, choose }: Choice): number {
  return Math.max(1, Math.floor((choose - learn) / SAMPLE));
}

/** The first states alone: they are the same whatever their number. */
function firstStates(most: PredictiveState, order: number): PredictiveState {
  const length = most.stateMap.length / most.order;
  return {
    ...most,
    order,
    stateMap: most.stateMap.slice(0, order * length),
    explained: most.explained.slice(0, order),
  };
}

/** Forecasts and recursion of given states by exact regression on the windows learned from. */
function readOut({ frames, past, shape, learn }: Choice, state: PredictiveState): PredictiveState {
  const { window, horizon, numbers } = shape;
  const d = state.order;
  const future = horizon * numbers;
  const regression = new ReadoutRegression(d, future + d);
  const target = new Float64Array(future + d);
  const phi = new Float64Array(past.length);
  const x = new Float64Array(d);
  let last = Number.NaN;
  frames.visit(window + horizon, 0, learn, (row, first) => {
    // The next state of the row before is this one's own, unless a break lies between.
    if (first === last + 1) x.set(target.subarray(future));
    else {
      past.write(row, 0, phi);
      mapStates(state, phi, x);
    }
    past.write(row, numbers, phi);
    mapStates(state, phi, target.subarray(future));
    target.set(row.subarray(window * numbers));
    regression.add(x, target);
    last = first;
  });
  const solved = regression.solve();
  const { matrix, radius } = clipRadius(solved.slice(future * d), d);
  return { ...state, forecastMap: solved.slice(0, future * d), transition: matrix, radius };
}

/** Squared error saved by the first 1, 2, … states, as a share of all energy that came. */
function gainsOf(choice: Choice, most: PredictiveState): Float64Array {
  const { frames, past, shape, learn, choose } = choice;
  const { window, horizon, numbers } = shape;
  const d = most.order;
  const gains = new Float64Array(d);
  const phi = new Float64Array(past.length);
  const x = new Float64Array(d);
  const left = new Float64Array(horizon * numbers);
  let energy = 0;
  frames.visit(
    window + horizon,
    learn,
    choose,
    (row) => {
      past.write(row, 0, phi);
      left.set(row.subarray(window * numbers));
      mapStates(most, phi, x);
      for (const value of left) energy += value * value;
      for (let k = 0; k < d; k++) {
        for (let c = 0; c < left.length; c++) {
          const told = most.forecastMap[c * d + k] * x[k];
          gains[k] += told * (2 * left[c] - told);
          left[c] -= told;
        }
      }
    },
    strideOf(choice),
  );
  for (let k = 1; k < d; k++) gains[k] += gains[k - 1];
  return gains.map((gain) => (energy > 0 ? gain / energy : 0));
}

/** The fewest that bring nearly what the best number of them brings; 1 where none brings anything. */
function worthwhile(gains: Float64Array): number {
  const best = Math.max(0, ...gains);
  const enough = gains.findIndex((gain) => gain >= (1 - WORTH) * best);
  return enough === -1 ? 1 : enough + 1;
}
