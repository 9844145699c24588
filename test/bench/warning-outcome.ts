/**
 * What warnings come to: a gateway's own filter led over readings it did not learn from, its warnings opened and closed by a
 * rule, and each held against what then came.
 */
import { type Bundle, bundleDigest, encodeBundle, type Site, type WarnRule } from '@stillwell/protocol';
import { type Outlook, outlooksOf, readingOf, Serving, SignalWarnings, type Trust, trustOf } from '@stillwell/runtime';
import { modelFromBundle } from '@stillwell/runtime/filter';

/** What one tick said of one signal. */
interface Look {
  readonly outlooks: readonly Outlook[];
  readonly reading: number;
  readonly trust: Trust;
}

/** Everything said over some ticks, by tick and signal; rules are tried on it afterwards. */
export interface Said {
  readonly firstTick: number;
  readonly looks: readonly (readonly Look[])[];
}

/** One warning, from its opening on; ticks from there. */
export interface OneWarning {
  readonly probability: number;
  /** First reading past the limit within the horizon, which is what the probability was of; null: none. */
  readonly crossed: number | null;
  readonly earliest: number | null;
  readonly likely: number | null;
  readonly latest: number | null;
}

/** What a rule came to. */
export interface Outcome {
  readonly warnings: readonly OneWarning[];
  /** Times the readings went past a limit after a horizon on its near side; of these, such that a warning was open for. */
  readonly excursions: number;
  readonly warned: number;
  /** Ticks between opening and such an excursion. */
  readonly leads: readonly number[];
  readonly messages: number;
}

/** Leads the filter over (nc) columns from `firstTick` on; nothing is noted before index `from`. */
export function listen(
  bundle: Bundle,
  site: Site,
  values: readonly Float64Array[],
  firstTick: number,
  from: number,
): Said {
  const model = modelFromBundle(bundle);
  const digest = bundleDigest(encodeBundle(bundle));
  const serving = new Serving({ bundle, model, digest, epoch: 1, sequence: 1 });
  const readings = new Float64Array(model.channelCount);
  const looks: Look[][] = [];
  for (let t = 0; t < values[0]!.length; t++) {
    for (let c = 0; c < readings.length; c++) readings[c] = values[c]![t]!;
    serving.step(firstTick + t, readings);
    if (t < from) continue;
    looks.push(
      site.signals.map(({ limits }, i) => ({
        outlooks: outlooksOf(serving, serving.median, i, limits),
        reading: readingOf(serving, i),
        trust: trustOf(serving, i),
      })),
    );
  }
  return { firstTick: firstTick + from, looks };
}

/** Opens and closes warnings by a rule. */
export function outcomeOf({ firstTick, looks }: Said, site: Site, rule: WarnRule): Outcome {
  const signals = site.signals.map((one) => ({ ...one, warn: null }));
  const outcome = { warnings: [] as OneWarning[], excursions: 0, warned: 0, leads: [] as number[], messages: 0 };
  for (let i = 0; i < signals.length; i++) {
    const book = new SignalWarnings({ ...site, warn: rule, signals }, i);
    /** Tick at which what is open was opened, and index of the last reading past, by limit. */
    const openSince = new Map<string, number>();
    const lastPast = new Map<string, number>();
    for (const [n, at] of looks.entries()) {
      const { outlooks, reading, trust } = at[i]!;
      for (const limit of excursionsAt(n, at[i]!, site.horizon, lastPast)) {
        outcome.excursions++;
        const since = openSince.get(limit);
        if (since === undefined) continue;
        outcome.warned++;
        outcome.leads.push(n - since);
      }
      book.look(firstTick + n, outlooks, reading, trust);
      if (!book.isDue) continue;
      const words = book.words();
      outcome.messages++;
      book.sent();
      book.arrived(words);
      for (const { limit, status } of words) {
        if (status === 'updated') continue;
        if (status !== 'opened') openSince.delete(limit);
        else {
          openSince.set(limit, n);
          const warning = openedAt(looks, i, n, outlooks.find((one) => one.limit === limit)!, site.horizon);
          if (warning !== null) outcome.warnings.push(warning);
        }
      }
    }
  }
  return outcome;
}

/** Limits that the reading passes after a horizon on their near side; notes all that it lies past. */
function excursionsAt(
  n: number,
  { outlooks, reading }: Look,
  horizon: number,
  lastPast: Map<string, number>,
): string[] {
  return outlooks.flatMap((outlook) => {
    if (!isPast(reading, outlook)) return [];
    const isNew = n - (lastPast.get(outlook.limit) ?? 0) > horizon;
    lastPast.set(outlook.limit, n);
    return isNew ? [outlook.limit] : [];
  });
}

/** A warning opened at index n, held against what came; null: the readings end before that is known. */
function openedAt(
  looks: Said['looks'],
  signal: number,
  n: number,
  outlook: Outlook,
  horizon: number,
): OneWarning | null {
  if (n + horizon >= looks.length) return null;
  const { probability, earliest, likely, latest } = outlook;
  let crossed: number | null = null;
  for (let h = 1; h <= horizon && crossed === null; h++)
    if (isPast(looks[n + h]![signal]!.reading, outlook)) crossed = h;
  return { probability, crossed, earliest, likely, latest };
}

function isPast(reading: number, { side, value }: Outlook): boolean {
  return side === 'above' ? reading > value : reading < value;
}
