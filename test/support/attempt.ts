/** What a kind of model is tried on, from plain series: the steps of a fit up to that point. */
import { encode } from '../../protocol/index.ts';
import type { Series } from '../../trainer/history/series.ts';
import { prepareHistory } from '../../trainer/identify/prepare.ts';
import { teach } from '../../trainer/identify/teach.ts';
import type { Attempt } from '../../trainer/kinds/candidate.ts';
import { FIT_DEFAULTS } from '../../trainer/pipeline.ts';
import { splitHistory } from '../../trainer/requirements.ts';
import { hourlySite } from './history.ts';

/** Bytes for a kind's sections in the default bundle, near enough. */
const ROOM = 20_000;

/** An attempt with the default options. */
export function attemptOf(series: Series, horizon: number, step: number): Attempt {
  const names = series.names;
  const site = hourlySite(names.slice(0, series.signalCount), horizon, names.slice(series.signalCount));
  const split = splitHistory(series, site, FIT_DEFAULTS);
  const lattices = names.map(() => ({ step, offset: 0 }));
  const prepared = { ...prepareHistory(series, site, lattices, split), earlier: null };
  const taught = teach(prepared);
  return {
    series,
    site,
    options: FIT_DEFAULTS,
    split,
    prepared,
    taught,
    around: { ...prepared.around, bank: taught.choice.bank, round: taught.round, coverage: 0.9, boundsRate: 0.05 },
    bytesLeft: (sections) => ROOM - encode(sections).length,
  };
}
