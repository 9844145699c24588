/**
 * Whether probabilities came true as often as they said: shares by tenths of what was said (a reliability diagram in
 * numbers), the Brier score, and a rising table that puts right what is said.
 */
import { CROSSING_KNOTS } from '@stillwell/protocol';
import type { CrossingPair } from './crossings.ts';

/** One tenth of the scale. */
export interface ReliabilityBin {
  /** Mean of what was said. */
  readonly said: number;
  /** Share that came true. */
  readonly observed: number;
  readonly count: number;
}

/** The reliability of crossing probabilities over some time. */
export interface Reliability {
  /** Whether the limits were declared by the site; otherwise they are quantiles of the readings. */
  readonly isDeclared: boolean;
  readonly limits: number;
  /** Questions asked: one a limit and origin. */
  readonly count: number;
  /** Share of them that came true. */
  readonly crossed: number;
  /** Tenths of the scale that anything was said in, ascending. */
  readonly bins: readonly ReliabilityBin[];
  /** Mean squared difference of probability and outcome; 0 is perfect. */
  readonly brier: number;
  /** The same for saying `crossed` every time. */
  readonly brierOfShare: number;
  /** Mean |said − observed| over the bins, weighted by their counts. */
  readonly meanGap: number;
  /** Crossings of which a step was said and that came: mean of step said − step that came, and of its size; ticks. */
  readonly timed: number;
  readonly stepBias: number;
  readonly stepError: number;
}

const BINS = 10;
/** What the table is held to what was said by, in questions of which each is worth a whole horizon. */
const PRIOR_WEIGHT = 4;

/**
 * Sums up.
 *
 * shapes  pairs of one model and time
 * units   shares; steps in ticks
 * throws  nothing; NaN where there is nothing to average
 * source  Brier, Monthly Weather Review 78 (1950); reliability: Murphy & Winkler, Applied Statistics 26 (1977)
 * cost    O(n)
 */
export function reliabilityOf(pairs: readonly CrossingPair[], limits: number, isDeclared: boolean): Reliability {
  const count = pairs.length;
  const crossed = pairs.filter((pair) => pair.cameTrue).length / count;
  const bins = binsOf(pairs);
  const timed = pairs.filter((pair) => pair.saidStep !== null && pair.cameStep !== null);
  const late = timed.map((pair) => (pair.saidStep ?? 0) - (pair.cameStep ?? 0));
  return {
    isDeclared,
    limits,
    count,
    crossed,
    bins,
    brier: pairs.reduce((sum, pair) => sum + (pair.said - Number(pair.cameTrue)) ** 2, 0) / count,
    brierOfShare: crossed * (1 - crossed),
    meanGap: bins.reduce((sum, bin) => sum + bin.count * Math.abs(bin.said - bin.observed), 0) / count,
    timed: timed.length,
    stepBias: late.reduce((sum, ticks) => sum + ticks, 0) / late.length,
    stepError: late.reduce((sum, ticks) => sum + Math.abs(ticks), 0) / late.length,
  };
}

function binsOf(pairs: readonly CrossingPair[]): ReliabilityBin[] {
  return Array.from({ length: BINS }, (_, bin) => {
    const own = pairs.filter(({ said }) => Math.min(BINS - 1, Math.floor(said * BINS)) === bin);
    const came = own.filter((pair) => pair.cameTrue).length;
    const said = own.reduce((sum, pair) => sum + pair.said, 0) / own.length;
    return { said, observed: came / own.length, count: own.length };
  }).filter((bin) => bin.count > 0);
}

/**
 * How often limits were crossed where CROSSING_KNOTS were said: each pair is shared between the two knots beside it, each
 * knot's share is drawn towards what was said by a few questions' worth of doubt, and neighbours that fall are pooled.
 * 0 and 1 stay, so that a limit out of reach is not spoken of.
 *
 * shapes  pairs of one model and time; `worth` questions that a pair counts for, since those that overlap in time repeat
 *         each other; result (CROSSING_KNOTS)
 * units   shares
 * throws  nothing
 * source  pooling adjacent violators: Ayer and others, Annals of Mathematical Statistics 26 (1955); for probabilities:
 *         Zadrozny & Elkan, KDD (2002)
 * cost    O(n)
 */
export function crossingTable(pairs: readonly CrossingPair[], worth: number): Float64Array {
  const last = CROSSING_KNOTS.length - 1;
  const weight = new Float64Array(last + 1).fill(PRIOR_WEIGHT);
  const came = Float64Array.from(CROSSING_KNOTS, (knot) => PRIOR_WEIGHT * knot);
  for (const { said, cameTrue } of pairs) {
    let k = 1;
    while (k < last && said > CROSSING_KNOTS[k]) k++;
    const share = (said - CROSSING_KNOTS[k - 1]) / (CROSSING_KNOTS[k] - CROSSING_KNOTS[k - 1]);
    // Against the knot's own value, so that a bin's pairs lean the knot by how far they were off, not by where they lie.
    const off = Number(cameTrue) - said;
    weight[k - 1] += worth * (1 - share);
    came[k - 1] += worth * (1 - share) * (off + CROSSING_KNOTS[k - 1]);
    weight[k] += worth * share;
    came[k] += worth * share * (off + CROSSING_KNOTS[k]);
  }
  return rising(
    // Such a lean can carry a knot past what a chance can be.
    came.map((sum, k) => Math.min(1, Math.max(0, sum / weight[k]))),
    weight,
  );
}

/** Least squares among rising tables from 0 to 1, to six digits: what a person can read and a document need not spell out. */
function rising(values: Float64Array, weights: Float64Array): Float64Array {
  const blocks: { value: number; weight: number; size: number }[] = [];
  values.forEach((value, k) => {
    let block = { value, weight: weights[k], size: 1 };
    for (let before = blocks.at(-1); before !== undefined && before.value > block.value; before = blocks.at(-1)) {
      blocks.pop();
      const weight = before.weight + block.weight;
      block = {
        value: (before.value * before.weight + block.value * block.weight) / weight,
        weight,
        size: before.size + block.size,
      };
    }
    blocks.push(block);
  });
  const flat = blocks.flatMap(({ value, size }) => new Array<number>(size).fill(value));
  const last = flat.length - 1;
  return Float64Array.from(flat, (value, k) => (k === 0 ? 0 : k === last ? 1 : Math.round(1e6 * value) / 1e6));
}
