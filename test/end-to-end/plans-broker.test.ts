/** Plans over a real broker: learn, run, publish a plan and see the forecast follow it; bad ones, wrong ones, a restart. */
import { parseForecastMessage, sealBundle, toHex } from '@stillwell/protocol';
import { type Connection, openConnection } from '@stillwell/runtime/mqtt';
import { describe, expect, onTestFinished, test } from 'vitest';
import { systemClock } from '../../runtime/clock.ts';
import { nodeDisk } from '../../runtime/disk.ts';
import { Gateway } from '../../runtime/gateway.ts';
import type { Log } from '../../runtime/log.ts';
import { FIT_DEFAULTS, fit as fitHistory } from '../../trainer/pipeline.ts';
import { DEAD_TIME, GAIN, HORIZON, plannedHistory, plannedSite, stepResponse } from '../bench/planned-plant.ts';
import { mosquittoMissing, startAedes, startMosquitto, type TestBroker } from '../support/broker.ts';
import { testFolder } from '../support/folder.ts';
import { author, trusted } from '../support/running-site.ts';
import { until } from '../support/until.ts';

const TICKS = 6000;
const LIVE = 400;
/** At tick STAYS the valve is put to 1 and left there. */
const STAYS = 280;
const site = plannedSite();
const tickMs = site.tickMs;
const history = plannedHistory(TICKS, 21);
const FIRST = history.series.firstTick + TICKS;
const plant = plannedHistory(LIVE, 22);
const fitted = await fitHistory(history, { ...FIT_DEFAULTS, kind: 'linear' });
const sealed = sealBundle(fitted.document, { epoch: 1, sequence: 1 }, [author]);
const wanted = plannedHistory(LIVE, 22, (t) => (t < STAYS ? plant.series.values[1]![t]! : 1));

const at = (tick: number): string => new Date((FIRST + tick) * tickMs).toISOString();
const json = (value: unknown): Uint8Array => new TextEncoder().encode(JSON.stringify(value));

interface Stage {
  readonly plc: Connection;
  readonly warnings: string[];
  gateway: Gateway;
  /** The newest forecast of the outlet. */
  latest: ReturnType<typeof parseForecastMessage>;
  start(): Gateway;
  play(from: number, to: number): Promise<void>;
}

async function openStage(broker: TestBroker): Promise<Stage> {
  const data = testFolder();
  const warnings: string[] = [];
  const log: Log = { debug: () => {}, info: () => {}, warn: (text) => void warnings.push(text), error: () => {} };
  const plc = openConnection({
    url: broker.url,
    clientId: 'plc',
    protocol: 'auto',
    onMessage: (topic, payload) => {
      if (topic === 'stillwell/heater/forecast/outlet') stage.latest = parseForecastMessage(payload);
    },
  });
  await plc.firstConnect(5000);
  await plc.subscribe(['stillwell/heater/forecast/+']);
  const start = (): Gateway =>
    new Gateway(
      {
        site,
        gateway: 'g1',
        data,
        broker: { url: broker.url, protocol: 'auto', username: null, password: null, tls: {} },
        trusted,
        clock: 'readings',
        segmentTicks: 60,
        spoolBytes: 1e8,
        healthSeconds: 60,
      },
      { clock: systemClock, disk: nodeDisk, log, firstRetryMs: 60, willDelaySeconds: 0 },
    );
  const stage: Stage = {
    plc,
    warnings,
    gateway: start(),
    latest: undefined as never,
    start,
    async play(from, to) {
      const sent: Promise<unknown>[] = [];
      for (let t = from; t < to; t++) {
        for (const [c, topic] of ['plant/outlet', 'plant/valve'].entries()) {
          const payload = json({
            v: wanted.series.values[c]![t],
            t: new Date((FIRST + t) * tickMs + 5000).toISOString(),
          });
          sent.push(plc.publish({ topic, payload, qos: 1, retain: false }));
        }
        if (t % 20 === 0) await Promise.all(sent.splice(0));
      }
      await Promise.all(sent);
      // A tick closes with the first reading behind its lateness: the last one stays open.
      const origin = at(to - 2);
      await until(`a forecast from ${origin}`, () => stage.latest?.origin === origin);
    },
  };
  return stage;
}

const brokers: readonly (readonly [string, () => Promise<TestBroker>, string | null])[] = [
  ['aedes, MQTT 3.1.1', () => startAedes(), null],
  ['mosquitto, MQTT 5', () => startMosquitto(), mosquittoMissing],
];

describe.each(brokers)('on %s', (_, startBroker, missing) => {
  test.skipIf(missing !== null)(
    'learn, run, publish plans: good, bad, wrong, none',
    async () => {
      const broker = await startBroker();
      onTestFinished(() => broker.stop());
      const stage = await openStage(broker);
      const { plc, warnings } = stage;
      onTestFinished(async () => {
        await stage.gateway.stop();
        await plc.end();
      });
      const tell = (payload: Uint8Array): Promise<unknown> =>
        plc.publish({ topic: 'plan/valve', payload, qos: 1, retain: true });
      await until('connected', () => stage.gateway.isConnected);
      stage.gateway.offerBundle(sealed, 'by hand');
      expect(toHex(stage.gateway.engine.serving!.checked.digest)).toHaveLength(64);

      await stage.play(0, 302);
      const before = stage.latest;
      expect(before.inputs).toBe('held');
      expect(before.inputs_ahead).toEqual([
        {
          input: 'valve',
          unit: '1',
          use: 'expected',
          plan_age_s: null,
          plan_until: null,
          plan_error: null,
          usual_error: expect.any(Number),
        },
      ]);

      // A plan to open the valve by two: the forecast follows at once, by what the plant is known to answer.
      const plan = (value: number): Uint8Array =>
        json({ start: at(301), step: `${tickMs / 1000}s`, values: new Array(200).fill(value) });
      await tell(plan(1));
      await until('a forecast under the plan', () => stage.latest.inputs === 'planned');
      const still = stage.latest;
      await tell(plan(3));
      await until('a forecast under the next plan', () => stage.latest.median.at(-1)! > still.median.at(-1)! + GAIN);
      const opened = stage.latest;
      expect(opened.origin).toBe(before.origin);
      for (let h = 1; h <= HORIZON; h++) {
        const more = opened.median[h - 1]! - still.median[h - 1]!;
        // 8 % of the full answer: learned from 4800 ticks.
        expect(Math.abs(more - 2 * stepResponse(h))).toBeLessThan(0.08 * 2 * GAIN);
      }
      expect(opened.median[DEAD_TIME - 2]).toBeCloseTo(still.median[DEAD_TIME - 2]!, 1);
      expect(opened.inputs_ahead![0]).toMatchObject({ use: 'planned', plan_age_s: 0, plan_until: at(501) });

      // Bad plans: one line each, counted, and the ruling plan stays.
      const bad: readonly (readonly [Uint8Array, string])[] = [
        [json({ start: at(301), step: '20s', values: [11] }), 'range'],
        [json({ start: at(301), step: '20s', values: ['open'] }), 'fields'],
        [json({ start: '2031-01-01T00:00:00Z', step: '20s', values: [1] }), 'far'],
        [json({ start: at(-50), step: '20s', values: [1] }), 'past'],
        [json({ start: at(301), step: '1h', values: new Array(4097).fill(1) }), 'long'],
        [new TextEncoder().encode('open at noon'), 'syntax'],
      ];
      const said = warnings.length;
      for (const [payload] of bad) await plc.publish({ topic: 'plan/valve', payload, qos: 1, retain: false });
      const { plans } = stage.gateway.engine;
      await until('all refused', () => Object.values(plans.refused).reduce((sum, n) => sum + n, 0) === bad.length);
      expect(plans.refused).toEqual(Object.fromEntries(bad.map(([, cause]) => [cause, 1])));
      expect(warnings.slice(said)).toHaveLength(bad.length);
      for (const [k, [, cause]] of bad.entries())
        expect(warnings[said + k]).toMatch(
          new RegExp(`^plan of valve refused \\(${cause}\\): plan: .*expected .*got [^\\n]*$`),
        );
      expect(stage.latest.median).toEqual(opened.median);

      // A restart: the retained plan is there again, from the broker alone.
      await stage.gateway.stop();
      stage.latest = before;
      stage.gateway = stage.start();
      await until('the plan after a restart', () => stage.latest.inputs === 'planned');
      expect(stage.latest.median).toEqual(opened.median);

      // The valve stays at one: the plan proves wrong, and every forecast under it says so.
      await stage.play(302, 372);
      const wrong = stage.latest;
      expect(wrong.inputs_ahead![0]!.plan_error).toBe(2);
      expect(wrong.quality).toBe('S');
      expect(wrong.quality_reason).toMatch(
        /^valve: what came differs from its plan by 2 1 on average; [\d.]+ 1 is usual/,
      );

      // Taken back: as without a plan.
      await tell(new Uint8Array(0));
      await until('no plan', () => stage.latest.inputs === 'held');
      expect(stage.latest.quality).toBeUndefined();
      expect(stage.latest.inputs_ahead![0]!.plan_until).toBeNull();
    },
    60_000,
  );
});
