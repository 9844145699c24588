/**
 * Skill by stretches of the judged time, so that one lucky stretch does not decide unseen.
 */
import type { Hindcast } from './hindcast.ts';
import { meanOf, skillScore } from './scores.ts';

/** A stretch of consecutive origins. */
export interface Block {
  readonly fromMs: number;
  readonly toMs: number;
  /** Against the rival named; NaN where nothing was counted. */
  readonly skill: number;
}

const MOST_BLOCKS = 8;
/** Horizons of origins in a stretch, at least: shorter ones would tell of one event. */
const BLOCK_HORIZONS = 2;

/**
 * Up to eight stretches of a signal's origins, as long as each other, each at least two horizons long; one where there are
 * fewer origins.
 *
 * shapes  signal, rival: places in the hindcast's lists
 * units   skill as a share
 * throws  nothing
 * source  own choice
 * cost    O(origins)
 */
export function skillByBlock(hindcast: Hindcast, signal: number, rival: number): Block[] {
  const { originMs, lossEvery, horizon, signals } = hindcast;
  const origins = originMs.length;
  const horizons = (origins * lossEvery) / horizon;
  const count = Math.max(1, Math.min(MOST_BLOCKS, Math.floor(horizons / BLOCK_HORIZONS)));
  const ours = hindcast.pathLoss[signal];
  const theirs = hindcast.rivalPathLoss[rival * signals.length + signal];
  return Array.from({ length: origins > 0 ? count : 0 }, (_, k) => {
    const from = Math.floor((k * origins) / count);
    const to = Math.floor(((k + 1) * origins) / count);
    return {
      fromMs: originMs[from],
      toMs: originMs[to - 1] + hindcast.tickMs,
      skill: skillScore(meanOf(ours, from, to), meanOf(theirs, from, to)),
    };
  });
}
