/** A Sparkplug node or device as its last birth described it, as far as the site file asks for its metrics. */
import { type Conversion, convert } from '../conversion.ts';
import type { GoodTest } from '../payload/good.ts';
import type { ReadingTarget } from '../reading-target.ts';
import { type Alias, DATATYPES, GOOD_QUALITY, type Metric, metricNumber } from './metric.ts';

/** A metric that the site file names. */
export interface WantedMetric {
  readonly channel: number;
  readonly metric: string;
  /** Null: as the standard says. */
  readonly isGood: GoodTest | null;
  readonly conversion: Conversion | null;
}

interface Wanted extends WantedMetric {
  /** Of the last birth; 0 where it did not name the metric. */
  datatype: number;
}

/** How a node or device stands: 'unheard' before its first birth, 'gone' since its death or its node's. */
export type MemberState = 'unheard' | 'alive' | 'gone';

/** What a birth or death leaves behind, to go on from. */
export interface SavedMember {
  readonly state: MemberState;
  readonly bornMs: number | null;
  readonly metrics: readonly (readonly [metric: string, datatype: number, alias: Alias | null])[];
}

/** A metric without the property is good, whatever else counts (6.4.9). */
const isGoodQuality = (quality: unknown, isGood: GoodTest | null): boolean =>
  quality === undefined || (isGood === null ? quality === GOOD_QUALITY : isGood(quality));

/** See the file head. Bounded by the site file: of a birth only what is wanted is kept. */
export class Member {
  state: MemberState = 'unheard';
  /** Payload time of the birth, ms since 1970; NaN before. */
  bornMs = Number.NaN;
  readonly #wanted = new Map<string, Wanted[]>();
  readonly #aliases = new Map<Alias, Wanted[]>();

  /** Asks for one more metric. */
  want(metric: WantedMetric): void {
    const entry = { ...metric, datatype: 0 };
    const same = this.#wanted.get(metric.metric);
    if (same) same.push(entry);
    else this.#wanted.set(metric.metric, [entry]);
  }

  /** Begins a birth: nothing of the one before holds any more. */
  beginBirth(timeMs: number): void {
    this.forget('alive');
    this.bornMs = timeMs;
  }

  /** Takes one metric of a birth down, and its value where `target` is given. */
  born(metric: Metric, timeMs: number, target: ReadingTarget | null): void {
    const wanted = metric.name === null ? undefined : this.#wanted.get(metric.name);
    if (wanted === undefined) return;
    for (const one of wanted) one.datatype = metric.datatype;
    if (metric.alias !== null) this.#aliases.set(metric.alias, wanted);
    if (target !== null) for (const one of wanted) deliver(one, metric, metric.datatype, timeMs, target);
  }

  /** A metric of a data message. One that the birth did not name is refused; one that nobody wants passes. */
  data(metric: Metric, timeMs: number, target: ReadingTarget): void {
    const byName = metric.name === null ? undefined : this.#wanted.get(metric.name);
    const wanted = byName ?? (metric.alias === null ? undefined : this.#aliases.get(metric.alias));
    if (wanted === undefined) return;
    for (const one of wanted) {
      // A datatype that is not the birth's shows that the alias has come to mean another metric, in a birth not heard.
      const isOther = byName === undefined && metric.datatype !== 0 && metric.datatype !== one.datatype;
      if (one.datatype === 0 || isOther) target.refuse(one.channel, 'unborn', one.metric, undefined);
      else deliver(one, metric, metric.datatype || one.datatype, timeMs, target);
    }
  }

  /** A data message came before a birth: each metric asked for is refused once. */
  refuseAll(target: ReadingTarget): void {
    for (const wanted of this.#wanted.values())
      for (const one of wanted) target.refuse(one.channel, 'unborn', one.metric, undefined);
  }

  /** Forgets names, types and aliases. */
  forget(state: MemberState): void {
    this.state = state;
    this.bornMs = Number.NaN;
    this.#aliases.clear();
    for (const wanted of this.#wanted.values()) for (const one of wanted) one.datatype = 0;
  }

  /** Datatype by the last birth of every metric asked for, with its channel; 0: not in the birth. */
  visit(see: (channel: number, metric: string, datatype: number) => void): void {
    for (const [metric, wanted] of this.#wanted) for (const one of wanted) see(one.channel, metric, one.datatype);
  }

  /** What `restore` takes. */
  save(): SavedMember {
    const aliasOf = new Map([...this.#aliases].map(([alias, wanted]) => [wanted, alias]));
    const metrics = [...this.#wanted].flatMap(([metric, wanted]) => {
      const { datatype } = wanted[0]!;
      return datatype === 0 ? [] : [[metric, datatype, aliasOf.get(wanted) ?? null] as const];
    });
    return { state: this.state, bornMs: Number.isNaN(this.bornMs) ? null : this.bornMs, metrics };
  }

  /** Goes on from a birth heard before. */
  restore({ state, bornMs, metrics }: SavedMember): void {
    this.forget(state);
    this.bornMs = bornMs ?? Number.NaN;
    for (const [metric, datatype, alias] of metrics) {
      const wanted = this.#wanted.get(metric);
      if (wanted === undefined) continue;
      for (const one of wanted) one.datatype = datatype;
      if (alias !== null) this.#aliases.set(alias, wanted);
    }
  }
}

function deliver(
  { channel, metric: name, isGood, conversion }: Wanted,
  metric: Metric,
  datatype: number,
  timeMs: number,
  target: ReadingTarget,
): void {
  if (!isGoodQuality(metric.quality, isGood)) target.refuse(channel, 'quality', name, metric.quality);
  else if (metric.isNull || metric.form === 0) target.refuse(channel, 'absent', name, null);
  else {
    const raw = metricNumber(metric, datatype);
    const value = convert(conversion, raw);
    if (!Number.isFinite(value)) target.refuse(channel, 'value', name, valueText(metric, datatype));
    else target.take(channel, value, Number.isNaN(metric.timeMs) ? timeMs : metric.timeMs);
  }
}

/** What stood there, in a word: values that are no numbers were not read. */
function valueText(metric: Metric, datatype: number): string {
  const type = DATATYPES[datatype];
  if (type === undefined) return `datatype ${datatype}`;
  return metric.form === 12 || metric.form === 13 ? String(metric.real) : `no ${type} that a number can hold`;
}
