/** The gateway's health as metrics: what health counts, how each signal is, and what the process costs its machine. */
import { type ForecastMessage, HEALTH_STATUSES, type HealthMessage } from '@stillwell/protocol';
import type { Gateway } from '../gateway.ts';
import { VERSION } from '../version.ts';
import { Exposition, type Sample } from './exposition.ts';
import type { GatewayFacts } from './told.ts';

/** Media type of the answer. */
export const METRICS_TYPE = 'application/openmetrics-text; version=1.0.0; charset=utf-8';

/** What the metrics are made of. */
export interface MetricsSource {
  readonly gateway: Gateway;
  readonly facts: GatewayFacts;
  /** The last tick's messages, by signal. */
  readonly forecasts: readonly Uint8Array[];
  /** The loop's pulses: how many, how late in sum, and how long ago the last. */
  readonly pulses: { readonly count: number; readonly sumMs: number; readonly ageMs: number };
  readonly viewers: number;
  readonly cpuSeconds: number;
  readonly heapBytes: number;
}

const LETTERS = ['good', 'F', 'C', 'S', 'M'] as const;
const NONE = {} as const;
/** Of what health counts, what is said better elsewhere. */
const SAID_ELSEWHERE = new Set(['segments_open', 'segments_waiting', 'spool_bytes', 'warnings_open']);
/** What may fall again, so that it is no counter. */
const GAUGES: ReadonlyMap<string, string> = new Map([
  ['segment_bytes_a_day', 'Bytes of segments a day, as projected.'],
  ['budget_exceeded', '1 while segments cost more than the residual budget.'],
  ['resolution_shed', 'Steps of the sensor to one of the record, of signals and inputs kept coarser.'],
]);
const COUNTER_NAME = /^[a-z][a-z0-9_]*$/;

/** The text of `/metrics`. */
export function metricsText(source: MetricsSource): string {
  const out = new Exposition();
  const health = parsed<HealthMessage>(source.gateway.healthNow());
  gateway(out, source, health);
  counters(out, health);
  signals(out, source);
  link(out, source);
  machine(out, source);
  return out.end();
}

function gateway(out: Exposition, { facts, gateway }: MetricsSource, health: HealthMessage): void {
  const { site, gateway: name } = health;
  out.info(
    { name: 'stillwell_gateway', help: 'Program, machine and site.' },
    { version: VERSION, node: process.versions.node, site, gateway: name, clock: gateway.config.clock },
  );
  out.states({ name: 'stillwell_status', help: 'What the gateway is doing.' }, HEALTH_STATUSES, [
    [NONE, gateway.status],
  ]);
  out.states(
    { name: 'stillwell_quality', help: 'Status letter of the gateway in the sense of NAMUR NE 107.' },
    LETTERS,
    [[NONE, health.quality ?? 'good']],
  );
  const { bundle } = facts;
  if (bundle === null) return;
  out.info(
    { name: 'stillwell_bundle', help: 'The bundle at work.' },
    { digest: bundle.digest, sequence: String(bundle.sequence), kind: bundle.kind },
  );
  out.gauge({ name: 'stillwell_bundle_made_seconds', unit: 'seconds', help: 'When it was made, since 1970.' }, [
    [NONE, bundle.made_ms / 1000],
  ]);
  out.gauge({ name: 'stillwell_bundle_size_bytes', unit: 'bytes', help: 'Of the sealed bundle.' }, [
    [NONE, bundle.bytes],
  ]);
}

/** Whatever health counts, also what later versions add. */
export function counters(out: Exposition, { counters: counts }: HealthMessage): void {
  for (const [name, count] of Object.entries(counts)) {
    if (SAID_ELSEWHERE.has(name) || !COUNTER_NAME.test(name)) continue;
    const gauge = GAUGES.get(name);
    const family = { name: `stillwell_${name}`, help: gauge ?? `${name.replaceAll('_', ' ')}, since the start.` };
    const label = gauge === undefined ? 'cause' : 'signal';
    const samples =
      typeof count === 'number'
        ? [[NONE, count] as const]
        : Object.entries(count).map(([key, n]): Sample => [{ [label]: key }, n]);
    if (gauge === undefined) out.counter(family, samples);
    else out.gauge(family, samples);
  }
}

function signals(out: Exposition, { facts, forecasts, gateway }: MetricsSource): void {
  const now = gateway.nowMs();
  out.states(
    { name: 'stillwell_signal_quality', help: 'Status letter of a signal’s forecast in the sense of NAMUR NE 107.' },
    LETTERS,
    facts.signals.map(({ signal, quality }) => [{ signal }, quality ?? 'good'] as const),
  );
  out.gauge(
    { name: 'stillwell_signal_reading_age_seconds', unit: 'seconds', help: 'Since the newest reading of a signal.' },
    facts.signals.flatMap(({ signal, last_ms }): Sample[] =>
      last_ms === null || now === null ? [] : [[{ signal }, Math.max(0, (now - last_ms) / 1000)]],
    ),
  );
  const messages = forecasts.map((payload) => parsed<ForecastMessage>(payload));
  out.gauge(
    {
      name: 'stillwell_limit_probability_ratio',
      unit: 'ratio',
      help: 'Probability that a signal crosses a limit within the horizon. Advisory estimate, never an alarm.',
    },
    messages.flatMap(({ signal, limits }) =>
      limits.map(({ limit, probability }): Sample => [{ signal, limit }, probability]),
    ),
  );
  out.gauge({ name: 'stillwell_warnings_open', help: 'Warnings open that a limit will probably be crossed.' }, [
    [NONE, facts.warnings.length],
  ]);
  out.gauge(
    { name: 'stillwell_forecast_valid_seconds', unit: 'seconds', help: 'Until a forecast must no longer be used.' },
    messages.flatMap(({ signal, valid_until }): Sample[] =>
      now === null ? [] : [[{ signal }, (Date.parse(valid_until) - now) / 1000]],
    ),
  );
}

function link(out: Exposition, { facts, gateway }: MetricsSource): void {
  const { spool, disk_fault } = facts;
  out.counter({ name: 'stillwell_forecasts', help: 'Forecasts of single signals handed to the broker.' }, [
    [NONE, gateway.publisher.forecastsIssued],
  ]);
  out.gauge({ name: 'stillwell_connected', help: '1 while the broker is connected.' }, [
    [NONE, facts.link.connected ? 1 : 0],
  ]);
  out.gauge({ name: 'stillwell_segments_waiting', help: 'Segments closed and without a receipt.' }, [
    [NONE, spool.waiting],
  ]);
  out.gauge(
    { name: 'stillwell_segments_oldest_age_seconds', unit: 'seconds', help: 'Since the first tick of the oldest one.' },
    spool.oldest_s === null ? [] : [[NONE, spool.oldest_s]],
  );
  out.gauge({ name: 'stillwell_spool_bytes', unit: 'bytes', help: 'Bytes of segments waiting.' }, [
    [NONE, spool.bytes],
  ]);
  out.gauge({ name: 'stillwell_spool_limit_bytes', unit: 'bytes', help: 'Bytes above which the oldest go.' }, [
    [NONE, spool.most_bytes],
  ]);
  out.gauge({ name: 'stillwell_disk_fault', help: '1 while the disk takes nothing.' }, [
    [NONE, disk_fault === null ? 0 : 1],
  ]);
}

function machine(out: Exposition, source: MetricsSource): void {
  const { facts, pulses, viewers, cpuSeconds, heapBytes } = source;
  out.summary(
    { name: 'stillwell_loop_delay_seconds', unit: 'seconds', help: 'How late the loop’s pulses came.' },
    pulses.count,
    pulses.sumMs / 1000,
  );
  out.gauge(
    { name: 'stillwell_loop_delay_largest_seconds', unit: 'seconds', help: 'The largest of the last minute.' },
    [[NONE, facts.loop_delay_s]],
  );
  out.gauge({ name: 'stillwell_pulse_age_seconds', unit: 'seconds', help: 'Since the loop came round last.' }, [
    [NONE, pulses.ageMs / 1000],
  ]);
  out.gauge({ name: 'stillwell_page_viewers', help: 'Browsers that follow along.' }, [[NONE, viewers]]);
  out.gauge({ name: 'stillwell_uptime_seconds', unit: 'seconds', help: 'Since the process started.' }, [
    [NONE, facts.up_s],
  ]);
  out.counter({ name: 'process_cpu_seconds', unit: 'seconds', help: 'Processor time, user and system.' }, [
    [NONE, cpuSeconds],
  ]);
  out.gauge({ name: 'process_resident_memory_bytes', unit: 'bytes', help: 'Resident memory.' }, [
    [NONE, facts.memory_bytes],
  ]);
  out.gauge({ name: 'process_heap_bytes', unit: 'bytes', help: 'Used heap of the JavaScript engine.' }, [
    [NONE, heapBytes],
  ]);
}

/** Our own messages, written a moment ago. */
function parsed<T>(payload: Uint8Array): T {
  return JSON.parse(Buffer.from(payload).toString()) as T;
}
