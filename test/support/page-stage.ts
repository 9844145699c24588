/**
 * A gateway with its page on a stage: an invented site of any number of signals, a broker in this process, a clock that the test
 * moves. Signals swing daily, each in its own phase, with a limit on the first.
 */
import { createHash } from 'node:crypto';
import { encodeBundle, parseSite, type Site, schemaHash, sealBundle } from '@stillwell/protocol';
import { modelFromBundle, runProbe } from '@stillwell/runtime/filter';
import { systemClock } from '../../runtime/clock.ts';
import type { GatewayConfig } from '../../runtime/config.ts';
import { nodeDisk } from '../../runtime/disk.ts';
import { Gateway } from '../../runtime/gateway.ts';
import type { Log } from '../../runtime/log.ts';
import { type Connection, openConnection } from '../../runtime/mqtt/connection.ts';
import { Page } from '../../runtime/page/page.ts';
import type { ServerLimits } from '../../runtime/page/server.ts';
import { startAedes, type TestBroker } from './broker.ts';
import { syntheticBundle } from './models.ts';
import { author, trusted } from './running-site.ts';
import { until } from './until.ts';

/** 2026-03-01T00:00:00Z */
export const FIRST_TICK = Date.UTC(2026, 2, 1) / 60_000;
const TICK_MS = 60_000;
const HORIZON = 24;

/** What stands on the stage. */
export interface StageChoice {
  readonly signals?: number;
  /** With an input `pump`, which may be planned. */
  readonly input?: true;
  /** Where the gateway keeps its data. */
  readonly data: string;
  readonly warmupTicks?: number;
  /** High limit of the first signal; 14 unless given. */
  readonly limit?: number;
  readonly clock?: 'wall' | 'readings';
  readonly wall?: () => number;
  readonly limits?: Partial<ServerLimits>;
}

/** The stage. */
export interface PageStage {
  readonly site: Site;
  readonly gateway: Gateway;
  readonly page: Page;
  readonly broker: TestBroker;
  readonly plant: Connection;
  /** Every line of the log. */
  readonly log: string[];
  readonly url: string;
  /** Puts the site's bundle to work. */
  load(sequence?: number): void;
  /** Publishes readings of ticks [from, to), and waits until they are closed; `without` leaves a signal out. */
  play(from: number, to: number, without?: string): Promise<void>;
  stop(): Promise<void>;
}

/** Signal names of a stage: s1, s2 … */
export function signalNames(count: number): string[] {
  return Array.from({ length: count }, (_, i) => `s${i + 1}`);
}

function siteText(names: readonly string[], hasInput: boolean, limit: number): string {
  const signals = names.flatMap((name, i) => [
    `  - name: ${name}`,
    `    topic: plant/${name}`,
    '    payload: { json: /v, time: /t }',
    '    unit: m',
    '    resolution: 0.01',
    '    aggregate: last',
    ...(i === 0 ? [`    limits: { high: ${limit} }`] : []),
  ]);
  const input = [
    'inputs:',
    '  - name: pump',
    '    topic: plant/pump',
    '    payload: { json: /v, time: /t }',
    '    unit: m',
    '    resolution: 0.01',
    '    aggregate: last',
    '    plan_topic: plan/pump',
  ];
  const head = ['site: marsh-lane', 'class: test', 'time_zone: Europe/London', 'tick: 1min', `horizon: ${HORIZON}`];
  return [...head, 'lateness: 30s', 'signals:', ...signals, ...(hasInput ? input : []), ''].join('\n');
}

function sealed(site: Site, sequence: number, warmupTicks: number): Uint8Array {
  const draft = syntheticBundle({
    site: site.site,
    equipmentClass: 'test',
    schema: schemaHash(site),
    tickMs: TICK_MS,
    signals: site.signals.map(({ name }) => name),
    inputs: site.inputs.map(({ name }) => name),
    warmupTicks,
    ...(site.inputs.length > 0 ? { response: true as const } : {}),
  });
  const { outputs, last } = runProbe(modelFromBundle(draft), 5, 64);
  const digest = new Uint8Array(createHash('sha256').update(outputs).digest());
  const document = encodeBundle({ ...draft, probe: { seed: 5, ticks: 64, digest, last } });
  return sealBundle(document, { epoch: 1, sequence }, [author]);
}

/** A swing around the middle that the synthetic bundle expects of each channel, with a little noise. */
function readingAt(channel: number, tick: number): number {
  const noise = (Math.imul(tick * 31 + channel + 7, 2654435761) >>> 0) / 2 ** 32 - 0.5;
  return 10 + 3 * channel + (1.5 + 0.5 * channel) * (Math.sin((2 * Math.PI * tick) / 24 + channel) + 0.3 * noise);
}

/** Opens a stage; the page listens on a free port. */
export async function openStage(choice: StageChoice): Promise<PageStage> {
  const site = parseSite(
    siteText(signalNames(choice.signals ?? 2), choice.input === true, choice.limit ?? 14),
    'site.yaml',
  );
  const broker = await startAedes();
  const plant = openConnection({ url: broker.url, clientId: 'plant', protocol: 'auto' });
  const log: string[] = [];
  const take = (text: string): void => void log.push(text);
  const lines: Log = { debug: () => {}, info: take, warn: take, error: take };
  const config: GatewayConfig = {
    site,
    gateway: 'g1',
    data: choice.data,
    broker: { url: broker.url, protocol: 'auto', username: null, password: null, tls: {} },
    trusted,
    clock: choice.clock ?? 'readings',
    segmentTicks: 60,
    spoolBytes: 1e8,
    healthSeconds: 60,
  };
  const clock = { ...systemClock, wall: choice.wall ?? systemClock.wall };
  const gateway = new Gateway(config, { clock, disk: nodeDisk, log: lines, firstRetryMs: 60 });
  const limits = choice.limits === undefined ? {} : { limits: choice.limits };
  const page = new Page(gateway, { clock, log: lines, ...limits });
  await page.open({ host: '127.0.0.1', port: 0, tries: 1 });
  await until('connected', () => gateway.isConnected);
  const send = (name: string, value: number, timeMs: number): Promise<void> =>
    plant.publish({
      topic: `plant/${name}`,
      payload: JSON.stringify({ v: Number(value.toFixed(2)), t: new Date(timeMs).toISOString() }),
      qos: 1,
      retain: false,
    });
  const names = [...site.signals, ...site.inputs].map(({ name }) => name);
  return {
    site,
    gateway,
    page,
    broker,
    plant,
    log,
    url: page.url!,
    load: (sequence = 1) => void gateway.offerBundle(sealed(site, sequence, choice.warmupTicks ?? 5), 'test'),
    async play(from, to, without) {
      for (let n = from; n < to; n++)
        await Promise.all(
          names.map((name, c) =>
            name === without ? undefined : send(name, readingAt(c, n), (FIRST_TICK + n) * TICK_MS + 500 + 10 * c),
          ),
        );
      // One reading in the tick behind moves the watermark past the last one's lateness.
      const last = names.length - 1;
      await send(names[last]!, readingAt(last, to - 1), (FIRST_TICK + to) * TICK_MS + 31_000);
      await until(`tick ${to - 1}`, () => gateway.engine.aligner.nextTick === FIRST_TICK + to);
    },
    async stop() {
      await Promise.all([page.close(), gateway.abandon()]);
      await plant.end(true);
      await broker.stop();
    },
  };
}
