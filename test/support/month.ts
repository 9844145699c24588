/**
 * A month of an invented pumping station in readings as they arrive: ten-minute ticks, three signals and an input, with
 * single readings and whole stretches missing, readings that come hours late, readings that come twice, and ticks with
 * two readings. Keeps its own account, by other means than the gateway's, of what each tick holds.
 */
import { encodeBundle, latticeIndex, parseSite, type Site, schemaHash, sealBundle } from '@stillwell/protocol';
import { modelFromBundle } from '@stillwell/runtime/filter';
import { bundleOfKind, type KindName } from './every-kind.ts';
import { type ModelChoice, seededNumbers, syntheticBundle, syntheticReadings } from './models.ts';
import { author } from './running-site.ts';

export const MONTH_SITE = 'long-reach';
export const CHANNELS = ['level', 'inflow', 'power', 'command'] as const;
export const TICK_MS = 600_000;
export const LATENESS_MS = 120_000;
/** 2026-03-01T00:00:00Z */
export const MONTH_START = Date.UTC(2026, 2, 1) / TICK_MS;
/** Step of every sensor. */
const STEP = 0.01;

const signalText = (name: string): string => `
  - name: ${name}
    topic: plant/${name}
    payload: { json: /v, time: /t }
    unit: m
    resolution: 0.01
    aggregate: last`;

export const site: Site = parseSite(
  `site: ${MONTH_SITE}
class: test
time_zone: Europe/London
tick: 10min
horizon: 24
lateness: 2min
signals:${CHANNELS.slice(0, 3).map(signalText).join('')}
inputs:${signalText('command')}
`,
  'site.yaml',
);

const shape: ModelChoice = {
  site: MONTH_SITE,
  tickMs: TICK_MS,
  signals: CHANNELS.slice(0, 3),
  inputs: ['command'],
  schema: schemaHash(site),
  warmupTicks: 5,
};

/** A bundle for the station and its sealed bytes. */
export function monthBundle(seed: number, sequence: number, kind: KindName) {
  const bundle = bundleOfKind(kind, { ...shape, seed });
  const document = encodeBundle(bundle);
  const sealed = sealBundle(document, { epoch: 1, sequence }, [author]);
  return { document, bundle, model: modelFromBundle(bundle), sealed };
}

/** One MQTT message of the station. */
export interface Message {
  readonly topic: string;
  readonly payload: Uint8Array;
  readonly tick: number;
  readonly channel: number;
  readonly timeMs: number;
  readonly index: number;
}

/** What arrives while tick MONTH_START + n runs: its own readings, then late ones of ticks before. */
export function monthMessages(ticks: number, seed: number): Message[][] {
  const model = modelFromBundle(syntheticBundle(shape));
  const random = seededNumbers(seed);
  const arrivals: Message[][] = Array.from({ length: ticks }, () => []);
  syntheticReadings(model, ticks, seed, 0.03).forEach((row, n) => {
    row.forEach((value, channel) => {
      const isOut = (channel === 0 && n % 700 > 640) || n % 1500 > 1470;
      if (Number.isNaN(value) || isOut) return;
      const count = random() < 0.1 ? 2 : 1;
      for (let k = 0; k < count; k++) {
        const timeMs = (MONTH_START + n) * TICK_MS + Math.floor(random() * TICK_MS);
        const message = messageOf(channel, timeMs, latticeIndex(value, STEP, 0) + k);
        const delay = random() < 0.02 ? 1 + Math.floor(random() * 60) : 0;
        arrivals[Math.min(ticks - 1, n + delay)]!.push(message);
        if (random() < 0.02) arrivals[Math.min(ticks - 1, n + delay + Math.floor(random() * 3))]!.push(message);
      }
    });
  });
  return arrivals;
}

function messageOf(channel: number, timeMs: number, index: number): Message {
  const body = JSON.stringify({ v: index / 100, t: new Date(timeMs).toISOString() });
  const tick = Math.floor(timeMs / TICK_MS);
  return { topic: `plant/${CHANNELS[channel]}`, payload: Buffer.from(body), tick, channel, timeMs, index };
}

/** The plain account: per tick and channel the latest reading by its own time, when the tick closed and in the end. */
export class Account {
  readonly original = new Map<string, number>();
  readonly merged = new Map<string, number>();
  readonly #times = new Map<string, number>();
  #next = 0;

  /** A reading arrived; late ones count as far back as the gateway remembers, over restarts and power cuts too. */
  take(message: Message): void {
    if (message.tick < this.#next - 720) return;
    const key = `${message.tick} ${message.channel}`;
    if (message.timeMs < (this.#times.get(key) ?? Number.NEGATIVE_INFINITY)) return;
    this.#times.set(key, message.timeMs);
    this.merged.set(key, message.index);
    if (message.tick >= this.#next) this.original.set(key, message.index);
  }

  /** Ticks before `next` are closed. */
  close(next: number): void {
    this.#next = next;
  }
}
