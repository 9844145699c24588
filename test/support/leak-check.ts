/**
 * Proof that nothing which is learned, set or forecast has seen what comes after it: the same work is done on the history as
 * it is, with its judged part changed, and with its judged part gone; whatever moves by a bit has seen it.
 */
import type { Bundle } from '../../protocol/index.ts';
import { modelFromBundle } from '../../runtime/filter/index.ts';
import type { Series } from '../../trainer/history/series.ts';
import { replay } from '../../trainer/judge/replay.ts';

/** Work that is to be proved: from a history to a bundle, and to the history as its filter would see it. */
export type Work = (series: Series) => Promise<{ readonly bundle: Bundle; readonly seen: Series }>;

/** Last origins before the judged part whose forecasts are looked at. */
const ORIGINS = 40;

/** Names of the parts that have seen readings from index `judgedFrom` on; none where all is well. */
export async function leakedParts(work: Work, series: Series, judgedFrom: number): Promise<string[]> {
  const plain = await fingerprints(work, series, judgedFrom);
  const leaked = new Set<string>();
  for (const after of [changed(series, judgedFrom), gone(series, judgedFrom)]) {
    const other = await fingerprints(work, after, judgedFrom);
    for (const [part, print] of plain) if (other.get(part) !== print) leaked.add(part);
  }
  return [...leaked].sort();
}

async function fingerprints(work: Work, series: Series, judgedFrom: number): Promise<Map<string, string>> {
  const { bundle, seen } = await work(series);
  const { judge, probe, provenance, channels, bounds, guard, seasonal, warmupTicks, ...tensors } = bundle;
  const model = modelFromBundle(bundle);
  const forecasts: string[] = [];
  const span = { fromTick: judgedFrom - ORIGINS, toTick: judgedFrom };
  replay(model, seen, span, ({ median, lower, upper }) => {
    for (const values of [median, lower, upper]) forecasts.push(Buffer.from(values.slice().buffer).toString('base64'));
  });
  const parts = { tensors, scalings: channels, radii: bounds, guard, season: { seasonal, warmupTicks }, forecasts };
  return new Map(Object.entries(parts).map(([name, part]) => [name, JSON.stringify(part, bytesAsText)]));
}

function bytesAsText(_: string, value: unknown): unknown {
  return value instanceof Uint8Array ? Buffer.from(value).toString('base64') : value;
}

/** Another judged part altogether, on the same lattice of hundredths: upside down, larger, and shifted. */
function changed(series: Series, from: number): Series {
  const values = series.values.map((y, c) =>
    y.map((value, t) => (t < from ? value : Math.round(100 * (300 + 10 * c - 4 * value)) / 100)),
  );
  return { ...series, values };
}

function gone(series: Series, from: number): Series {
  return { ...series, values: series.values.map((y) => y.map((value, t) => (t < from ? value : Number.NaN))) };
}
