/**
 * One thing the survey found: a plain sentence, where, how many, what to do.
 */

/** How much it matters: 'note' needs nothing, 'look' should be looked at, 'serious' will spoil a fit or already lost readings. */
type Weight = 'note' | 'look' | 'serious';

/** What kind of trouble a finding is about, as a closed set. */
export type FindingKind =
  | 'gaps'
  | 'missing'
  | 'duplicates'
  | 'unordered'
  | 'constant'
  | 'near-constant'
  | 'stuck'
  | 'out-of-range'
  | 'outliers'
  | 'spikes'
  | 'resolution'
  | 'cadence'
  | 'clock-change'
  | 'clock-set-back'
  | 'copies'
  | 'columns'
  | 'missing-marks'
  | 'passed-over'
  | 'counter-resets'
  | 'short';

/** One finding; where and how many beside the sentence, for programs. */
export interface Finding {
  readonly kind: FindingKind;
  readonly weight: Weight;
  /** null: the history as a whole. */
  readonly signal: string | null;
  /** Span it concerns, ISO, UTC; null where it has none. */
  readonly from: string | null;
  readonly to: string | null;
  /** Readings, ticks or stretches, as the sentence says. */
  readonly count: number;
  readonly sentence: string;
  readonly advice: string;
}

/** ISO text of an instant, without needless milliseconds. */
export function iso(ms: number): string {
  return new Date(ms).toISOString().replace('.000Z', 'Z');
}

/** A length of time in words: the two largest units that matter. */
export function lengthOf(ms: number): string {
  const units: [number, string][] = [
    [86_400_000, 'd'],
    [3_600_000, 'h'],
    [60_000, 'min'],
    [1000, 's'],
  ];
  const first = units.findIndex(([unit]) => ms >= unit);
  if (first < 0) return `${Math.round(ms)} ms`;
  const [unit, name] = units[first] as [number, string];
  const [nextUnit, nextName] = units[first + 1] ?? [0, ''];
  const whole = Math.floor(ms / unit);
  const rest = nextUnit > 0 ? Math.floor((ms - whole * unit) / nextUnit) : 0;
  return rest > 0
    ? `${whole} ${name} ${rest} ${nextName}`
    : `${Number((rest > 0 || nextUnit > 0 ? whole : ms / unit).toPrecision(4))} ${name}`;
}

/** A number as people write it: few digits, none lost that the lattice knows. */
export function figure(value: number): string {
  return String(Number(value.toPrecision(9)));
}

/** "1 reading", "7 readings". */
export function counted(count: number, word: string): string {
  return `${count} ${word}${count === 1 ? '' : 's'}`;
}

/** A share in per cent; never 0 % or 100 % where it is neither. */
export function percent(share: number): string {
  const text = (share * 100).toFixed(1);
  if (text === '0.0' && share > 0) return '<0.1 %';
  if (text === '100.0' && share < 1) return '>99.9 %';
  return `${text} %`;
}
