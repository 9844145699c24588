/**
 * How much work the driven kind's search may be: counted in multiplications from the sizes alone, so that the same record
 * gets the same search on any machine. A search that would cost too much is made smaller; then the record is cut to its
 * latest ticks; where that leaves too few, the kind is not tried.
 */
import { parameterLayout } from './free-run.ts';

/** A search. */
export interface Effort {
  readonly featureCount: number;
  /** Kernel widths and penalties tried beside the first. */
  readonly widths: readonly number[];
  readonly penalties: readonly number[];
  /** Of the members that choose a setting. */
  readonly trialSeeds: readonly number[];
  readonly trialIterations: number;
  /** Of the members that stay. */
  readonly members: number;
  readonly iterations: number;
}

/** An effort, and how many of the latest ticks it may learn from. */
export interface Planned {
  readonly effort: Effort;
  readonly mostTicks: number;
}

const FULL: Effort = {
  featureCount: 40,
  widths: [3, 5],
  penalties: [0.1, 10],
  trialSeeds: [101, 102],
  trialIterations: 15,
  members: 5,
  iterations: 40,
};

/** For records with several signals, whose members have many parameters. */
const REDUCED: Effort = {
  featureCount: 24,
  widths: [4],
  penalties: [],
  trialSeeds: [101],
  trialIterations: 12,
  members: 3,
  iterations: 20,
};

/** Multiplications of a search: some seconds. */
const MOST_WORK = 6.5e9;
/** On fewer ticks than these a smaller search cut further learns nothing. */
const LEAST_TICKS = 600;

/**
 * Plans the search.
 *
 * shapes  hiddenCounts: numbers of hidden states tried
 * units   ticks
 * throws  nothing; null where the work cannot be brought within bounds
 * source  own choice
 * cost    trivial
 */
export function planEffort(
  signalCount: number,
  inputCount: number,
  hiddenCounts: readonly number[],
  learnTicks: number,
): Planned | null {
  const work = (effort: Effort): number => workPerTick(effort, signalCount, inputCount, hiddenCounts);
  if (work(FULL) * learnTicks <= MOST_WORK) return { effort: FULL, mostTicks: learnTicks };
  const mostTicks = Math.min(learnTicks, Math.floor(MOST_WORK / work(REDUCED)));
  return mostTicks < Math.min(LEAST_TICKS, learnTicks) ? null : { effort: REDUCED, mostTicks };
}

/** Multiplications a tick of record costs over the whole search. */
function workPerTick(
  { featureCount, widths, penalties, trialSeeds, trialIterations, members, iterations }: Effort,
  signalCount: number,
  inputCount: number,
  hiddenCounts: readonly number[],
): number {
  const linearisation = (hiddenCount: number): number => {
    const { count, states } = parameterLayout({ signalCount, inputCount, hiddenCount, featureCount });
    return (count * count * signalCount) / 2 + count * states * states;
  };
  const most = linearisation(Math.max(...hiddenCounts));
  const first = hiddenCounts.reduce((sum, hidden) => sum + linearisation(hidden), 0);
  const trials = trialSeeds.length * trialIterations * (first + (widths.length + penalties.length) * most);
  return trials + members * iterations * most;
}
