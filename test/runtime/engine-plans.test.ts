/** Plans inside a gateway: forecasts follow them; the filter's state, the record and the segments never know of them. */
import { parseForecastMessage, parseHealthMessage, parseSite, segmentHash } from '@stillwell/protocol';
import { saveState } from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { BundleKeeper } from '../../runtime/bundle/change.ts';
import { Engine } from '../../runtime/engine.ts';
import { forecastPayload } from '../../runtime/publish/forecasts.ts';
import { healthPayload } from '../../runtime/publish/health.ts';
import { inputOutlooks } from '../../runtime/publish/inputs.ts';
import { outlooksOf } from '../../runtime/publish/outlooks.ts';
import { MemoryDisk } from '../support/memory-disk.ts';
import { FIRST_TICK, plantMessages, SITE_TEXT, sealedOf, trusted } from '../support/running-site.ts';

const site = parseSite(`${SITE_TEXT}    plan_topic: plan/pump\n`, 'site.yaml');
const TICK = site.tickMs;
const TICKS = 150;
const plant = plantMessages(TICKS);
const at = (tick: number): number => (FIRST_TICK + tick) * TICK;
const plan = (from: number, value: number, count = 200): Uint8Array =>
  new TextEncoder().encode(JSON.stringify({ start: at(from), step: '1min', values: new Array(count).fill(value) }));

interface Run {
  readonly engine: Engine;
  readonly disk: MemoryDisk;
}

function start(disk = new MemoryDisk(), sealed = sealedOf(1, { response: true })): Run {
  const keeper = new BundleKeeper(disk, 'data', site, trusted);
  const engine = new Engine(
    {
      site,
      gateway: 'g1',
      disk,
      folder: 'data',
      segmentTicks: 40,
      spoolBytes: 1e9,
      stream: new Uint8Array(8).fill(9),
      note: () => {},
    },
    keeper,
  );
  const offered = keeper.offer(sealed, engine.serving?.checked ?? null);
  if (offered.outcome === 'accepted') engine.install(offered.checked);
  return { engine, disk };
}

function feed({ engine }: Run, from: number, to: number): void {
  for (let n = from; n < to; n++) {
    for (const { topic, payload, timeMs } of plant[n]!) engine.message(topic, payload, timeMs, null);
    engine.close(at(n + 1) + site.latenessMs);
    engine.settle();
  }
}

/** The forecast message of a signal, issued when its tick closed. */
function forecast({ engine }: Run, signal = 0) {
  const serving = engine.serving!;
  serving.computeBounds();
  const issuedAtMs = (serving.tick + 1) * TICK + site.latenessMs;
  const inputs = inputOutlooks(serving, engine.plans, site, issuedAtMs);
  const occasion = { site, gateway: 'g1', issuedAtMs, isCatchingUp: false, plans: engine.plans, inputs };
  const outlooks = outlooksOf(serving, serving.median, signal, site.signals[signal]!.limits);
  return parseForecastMessage(forecastPayload(serving, occasion, signal, outlooks, issuedAtMs));
}

describe('a plan', () => {
  test('changes forecasts at once, and neither state nor record nor segments', () => {
    const plain = start();
    const told = start();
    feed(plain, 0, 60);
    feed(told, 0, 60);
    const before = forecast(told);
    expect(before.inputs).toBe('held');
    expect(told.engine.plan('plan/pump', plan(60, 25), at(60)).map(({ kind }) => kind)).toEqual(['taken']);
    const after = forecast(told);
    expect(after.inputs).toBe('planned');
    expect(after.origin).toBe(before.origin);
    expect(after.median).not.toEqual(before.median);
    feed(plain, 60, TICKS);
    feed(told, 60, TICKS);
    expect(forecast(told).median).not.toEqual(forecast(plain).median);
    for (const run of [plain, told]) run.engine.stop();
    const pictures = [plain, told].map(({ engine, disk }) => ({
      state: saveState(engine.serving!.model, engine.serving!.state),
      segments: disk.list('data/spool').map((name) => Buffer.from(segmentHash(disk.read(`data/spool/${name}`)!))),
    }));
    expect(pictures[0]!.segments.length).toBeGreaterThan(2);
    expect(pictures[1]).toEqual(pictures[0]);
  });

  test('ends: then the forecasts are those without one, to the bit', () => {
    const plain = start();
    const told = start();
    feed(plain, 0, 50);
    feed(told, 0, 50);
    told.engine.plan('plan/pump', plan(50, 25, 20), at(50));
    expect(forecast(told).inputs_ahead![0]).toMatchObject({ use: 'planned', plan_age_s: 30 });
    feed(plain, 50, 70);
    feed(told, 50, 70);
    expect(forecast(told).inputs).toBe('held');
    expect(forecast(told).median).toEqual(forecast(plain).median);
  });

  test('that begins beyond the horizon waits', () => {
    const run = start();
    feed(run, 0, 50);
    const before = forecast(run).median;
    run.engine.plan('plan/pump', plan(100, 25), at(50));
    expect(forecast(run)).toMatchObject({ inputs: 'held', median: before });
    feed(run, 50, 80);
    expect(forecast(run).inputs).toBe('planned');
  });

  test('is taken back by an empty payload', () => {
    const run = start();
    feed(run, 0, 50);
    const before = forecast(run).median;
    run.engine.plan('plan/pump', plan(50, 25), at(50));
    run.engine.plan('plan/pump', new Uint8Array(0), at(50));
    expect(forecast(run)).toMatchObject({ inputs: 'held', median: before });
  });

  test('that was off by more than is usual is told of in every forecast that listens, and in health', () => {
    const run = start();
    feed(run, 0, 50);
    // Far from anything the pump does (about 16).
    run.engine.plan('plan/pump', plan(50, 25), at(50));
    expect(forecast(run).quality).toBeUndefined();
    feed(run, 50, 110);
    const wrong = forecast(run);
    expect(wrong.inputs_ahead![0]!.plan_error).toBeGreaterThan(5);
    expect(wrong.quality).toBe('S');
    expect(wrong.quality_reason).toMatch(
      /^pump: what came differs from its plan by [\d.]+ m on average; [\d.]+ m is usual/,
    );
    const health = parseHealthMessage(
      healthPayload({
        site: site.site,
        gateway: 'g1',
        nowMs: at(110),
        wallTickMs: null,
        holdsMs: 1000,
        status: 'running',
        lastChange: null,
        engine: run.engine,
        ship: { confirmed: 0, sent: 0, resent: 0, parked: 0, conflicts: 0 },
        reconnects: 0,
      }),
    );
    expect(health.quality).toBe('S');
    expect(health.counters.plans).toBe(1);
    expect(health.counters.plans_refused).toEqual({});
  });

  test('under a bundle that learned nothing of plans is said not to be used', () => {
    const run = start(new MemoryDisk(), sealedOf(1));
    feed(run, 0, 50);
    const before = forecast(run).median;
    run.engine.plan('plan/pump', plan(50, 25), at(50));
    expect(forecast(run)).toMatchObject({ inputs: 'held', median: before });
    expect(forecast(run).inputs_ahead![0]).toMatchObject({ use: 'expected', usual_error: null });
    expect(forecast(run).inputs_ahead![0]!.plan_until).not.toBeNull();
  });
});
