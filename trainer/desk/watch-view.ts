/**
 * What a person sees of a site's forecasts in a terminal: per signal the value now, steps ahead with bounds, a small plot,
 * quality, age and limits. A forecast past its own `valid_until` is shown as stale, never as a forecast.
 */
import { ADVISORY, type ForecastMessage, type HealthMessage, type StateMessage } from '@stillwell/protocol';
import { momentText, printable, shortNumber, spanText } from '../text-table.ts';
import { bandPlot } from './band-plot.ts';

/** The newest of each message of one site. */
export interface WatchedSite {
  readonly site: string;
  readonly forecasts: ReadonlyMap<string, ForecastMessage>;
  readonly state: StateMessage | null;
  readonly health: HealthMessage | null;
}

/** One signal's facts at a moment, for lines and `--json`. */
export interface SignalView {
  readonly signal: string;
  readonly unit: string;
  readonly now: number | null;
  readonly origin: string;
  readonly validUntil: string;
  readonly isStale: boolean;
  readonly quality: string | null;
  readonly qualityReason: string | null;
  /** Since the last reading, ms; null where none is known. */
  readonly ageMs: number | null;
  readonly inputs: string;
  readonly coverage: number;
  readonly steps: readonly {
    readonly step: number;
    readonly aheadMs: number;
    readonly median: number;
    readonly lower: number;
    readonly upper: number;
  }[];
  readonly limits: readonly {
    readonly limit: string;
    readonly value: number;
    readonly probability: number;
    readonly inMs: number | null;
  }[];
}

/** End of the newest tick that any message of the site stands for: the present of a replay. 0 before the first. */
export function newestTickEndMs(site: WatchedSite): number {
  const heard = [...site.forecasts.values(), ...(site.state === null ? [] : [site.state])];
  return Math.max(0, ...heard.map((message) => Date.parse(message.origin) + message.tick_s * 1000));
}

/** The facts of one signal. */
export function viewOf(forecast: ForecastMessage, state: StateMessage | null, nowMs: number): SignalView {
  const tickMs = forecast.tick_s * 1000;
  const steps = shownSteps(forecast.median.length).map((step) => ({
    step,
    aheadMs: step * tickMs,
    median: forecast.median[step - 1]!,
    lower: forecast.lower[step - 1]!,
    upper: forecast.upper[step - 1]!,
  }));
  const limits = forecast.limits.map(({ limit, value, probability, time }) => ({
    limit,
    value,
    probability,
    inMs: time === null ? null : Date.parse(time) - Date.parse(forecast.origin),
  }));
  return {
    signal: forecast.signal,
    unit: printable(forecast.unit),
    now: state?.filtered[forecast.signal] ?? null,
    origin: forecast.origin,
    validUntil: forecast.valid_until,
    isStale: nowMs > Date.parse(forecast.valid_until),
    quality: forecast.quality ?? null,
    qualityReason: forecast.quality_reason ? printable(forecast.quality_reason) : null,
    ageMs: forecast.last_reading_at === null ? null : nowMs - Date.parse(forecast.last_reading_at),
    inputs: forecast.inputs,
    coverage: forecast.coverage,
    steps,
    limits,
  };
}

/** One line of a signal, for pipes and logs. */
export function viewLine(view: SignalView): string {
  const head = `${view.origin} ${view.signal} ${valueText(view.now, view.unit)}`;
  if (view.isStale) return `${head} STALE: not valid after ${view.validUntil}`;
  const steps = view.steps.map(stepText).join('  ');
  return [head, steps, qualityText(view), limitsText(view)].filter(Boolean).join('  ');
}

/** The whole screen; `rows` and `columns` of the terminal decide how tall the plots are. */
export function screenText(
  site: WatchedSite,
  signals: readonly string[],
  nowMs: number,
  rows: number,
  columns: number,
): string {
  const shown = signals.filter((signal) => site.forecasts.has(signal));
  const room = Math.floor((rows - 5) / Math.max(1, shown.length)) - 3;
  const height = Math.max(1, Math.min(6, room));
  const width = Math.max(10, Math.min(72, columns - 16));
  const blocks = shown.map((signal) => signalBlock(site, signal, nowMs, width, height));
  const waiting = shown.length === 0 ? ['', `No forecast of ${site.site} yet.`] : [];
  return [healthLine(site), ...waiting, ...blocks, '', ...wrap(ADVISORY, columns)].join('\n');
}

function signalBlock(site: WatchedSite, signal: string, nowMs: number, width: number, height: number): string {
  const forecast = site.forecasts.get(signal)!;
  const view = viewOf(forecast, site.state, nowMs);
  const age = view.ageMs === null ? 'no reading yet' : `read ${spanText(Math.max(0, view.ageMs))} ago`;
  const inputs = view.inputs === 'none' ? '' : `, inputs ${view.inputs}`;
  const title = `\n${signal}  ${valueText(view.now, view.unit)}  (${age}${inputs})  ${qualityText(view)}`.trimEnd();
  if (view.isStale) return `${title}\n  STALE: not valid after ${view.validUntil}; the gateway has not renewed it`;
  const plot = bandPlot(forecast, width, height).map(
    (row, i) => `${axisText(forecast, i, height).padStart(12)} ${row}`,
  );
  const limits = limitsText(view);
  return [title, `  ${view.steps.map(stepText).join('   ')}`, ...plot, ...(limits === '' ? [] : [`  ${limits}`])].join(
    '\n',
  );
}

/** Highest value beside the first row, lowest beside the last. */
function axisText(forecast: ForecastMessage, row: number, height: number): string {
  if (row === 0) return shortNumber(Math.max(...forecast.upper));
  return row === height - 1 ? shortNumber(Math.min(...forecast.lower)) : '';
}

function healthLine({ site, health, forecasts }: WatchedSite): string {
  const any = [...forecasts.values()][0];
  const bundle = any?.bundle ? `bundle ${any.bundle.slice(0, 12)}… number ${any.sequence}` : 'no bundle';
  const status = health === null ? 'no health message' : `${health.gateway} ${health.status}`;
  return `${site}: ${status}, ${bundle}, origin ${any ? momentText(Date.parse(any.origin)) : '-'}`;
}

function valueText(value: number | null, unit: string): string {
  return `${shortNumber(value)}${unit === '1' ? '' : ` ${unit}`}`;
}

function stepText({ aheadMs, median, lower, upper }: SignalView['steps'][number]): string {
  return `+${spanText(aheadMs)} ${shortNumber(median)} [${shortNumber(lower)} .. ${shortNumber(upper)}]`;
}

function qualityText(view: SignalView): string {
  if (view.quality === null) return '';
  return `quality ${view.quality}${view.qualityReason === null ? '' : ` (${view.qualityReason})`}`;
}

function limitsText(view: SignalView): string {
  return view.limits
    .filter((limit) => limit.probability >= 0.01)
    .map(({ limit, value, probability, inMs }) => {
      const when = inMs === null ? 'unlikely within the horizon' : `probably in ${spanText(inMs)}`;
      return `${limit.replace('_', '-')} ${shortNumber(value)}: ${Math.round(probability * 100)} %, ${when}`;
    })
    .join('; ');
}

/** First step, last step, two between, without repeats. */
function shownSteps(horizon: number): number[] {
  const wanted = [1, Math.round(horizon / 4), Math.round(horizon / 2), horizon].filter((step) => step >= 1);
  return [...new Set(wanted)].sort((a, b) => a - b);
}

function wrap(text: string, columns: number): string[] {
  const lines: string[] = [''];
  for (const word of text.split(' ')) {
    const line = lines.at(-1)!;
    if (line !== '' && line.length + 1 + word.length > columns) lines.push(word);
    else lines[lines.length - 1] = line === '' ? word : `${line} ${word}`;
  }
  return lines;
}
