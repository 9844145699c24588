/** Answers are honest and cost the gateway nothing it could notice: every kind, to the bit, with and without questions. */
import {
  type AnswerMessage,
  parseAnswerMessage,
  parseQuestion,
  parseSite,
  type Site,
  segmentHash,
} from '@stillwell/protocol';
import { modelFromBundle, saveBounds, saveState } from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { BundleKeeper } from '../../../runtime/bundle/change.ts';
import { Engine } from '../../../runtime/engine.ts';
import { PlanKeeper } from '../../../runtime/ingest/plans.ts';
import { forecastPayload } from '../../../runtime/publish/forecasts.ts';
import { inputOutlooks } from '../../../runtime/publish/inputs.ts';
import type { Occasion } from '../../../runtime/publish/moment.ts';
import { outlooksOf } from '../../../runtime/publish/outlooks.ts';
import { Answerer } from '../../../runtime/questions/answer.ts';
import { Serving } from '../../../runtime/serving.ts';
import { bundleOfKind, EVERY_KIND, readingsOfKind } from '../../support/every-kind.ts';
import { MemoryDisk } from '../../support/memory-disk.ts';
import { seededNumbers } from '../../support/models.ts';
import { FIRST_TICK, plantMessages, SITE_TEXT, sealedOf, trusted } from '../../support/running-site.ts';

const bytes = (value: unknown): Uint8Array => new TextEncoder().encode(JSON.stringify(value));

function occasionOf(serving: Serving, plans: PlanKeeper, site: Site): Occasion {
  const issuedAtMs = (serving.tick + 1) * site.tickMs + 1000;
  const inputs = inputOutlooks(serving, plans, site, issuedAtMs);
  return { site, gateway: 'g1', issuedAtMs, isCatchingUp: false, plans, inputs };
}

function ask(answerer: Answerer, serving: Serving, plans: PlanKeeper, site: Site, question: object): AnswerMessage {
  const startMs = (serving.tick + 1) * site.tickMs;
  const asked = parseQuestion(bytes({ asker: 'test', ...question }), { site, nowMs: startMs, startMs });
  return parseAnswerMessage(answerer.answer(serving, occasionOf(serving, plans, site), asked));
}

function paths(serving: Serving, plans: PlanKeeper, site: Site): string[] {
  serving.computeBounds();
  const occasion = occasionOf(serving, plans, site);
  return site.signals.map(({ limits }, i) =>
    new TextDecoder().decode(
      forecastPayload(serving, occasion, i, outlooksOf(serving, serving.median, i, limits), occasion.issuedAtMs),
    ),
  );
}

describe.each(EVERY_KIND)('%s', (name) => {
  const bundle = bundleOfKind(name);
  const model = modelFromBundle(bundle);
  const { signalCount } = model;
  const channel = (k: number): string => `  - { name: ${bundle.channels[k]!.name}, unit: '${bundle.channels[k]!.unit}'`;
  const site = parseSite(
    [
      'site: a',
      'time_zone: UTC',
      `tick: ${bundle.tickMs}ms`,
      `horizon: ${bundle.horizon}`,
      'signals:',
      ...Array.from({ length: signalCount }, (_, i) => {
        const [low, high] = [-1, 1].map((side) => model.mean[i]! + side * model.scale[i]!);
        return `${channel(i)}, limits: { high: ${high}, low: ${low} } }`;
      }),
      ...(model.channelCount > signalCount ? ['inputs:'] : []),
      ...Array.from({ length: model.channelCount - signalCount }, (_, u) => `${channel(signalCount + u)} }`),
      '',
    ].join('\n'),
    'site',
  );
  const checked = { bundle, model, digest: new Uint8Array(32), epoch: 1, sequence: 1 };
  const TICKS = 120;
  const readings = readingsOfKind(name, model, TICKS, 5);

  const asked = site.inputs.length > 0 ? test : null;
  asked?.('nothing moves, to the bit, though asked between any two ticks', () => {
    const runs = [false, true].map((isAsked) => {
      const serving = new Serving(checked);
      const plans = new PlanKeeper(site);
      serving.plans = plans;
      const answerer = new Answerer();
      const random = seededNumbers(9);
      const said: string[][] = [];
      for (const [t, values] of readings.entries()) {
        serving.step(1000 + t, values);
        for (let k = 0; isAsked && k < 4; k++) {
          const value = model.mean[signalCount]! + 6 * (random() - 0.5) * model.scale[signalCount]!;
          ask(answerer, serving, plans, site, { plans: { [site.inputs[0]!.name]: k === 3 ? null : value } });
        }
        said.push(paths(serving, plans, site));
      }
      return { said, state: saveState(model, serving.state), bounds: saveBounds(model, serving.bounds) };
    });
    expect(runs[1]).toEqual(runs[0]);
  });

  const silent = site.inputs.length > 0 ? null : test;
  silent?.('without inputs there is nothing to ask', () => {
    const startMs = 1_000_000;
    expect(() => parseQuestion(bytes({ asker: 'a', plans: { x: 1 } }), { site, nowMs: startMs, startMs })).toThrow(
      'no such name, "x"; did you mean one of none',
    );
  });
});

const site = parseSite(`${SITE_TEXT}    plan_topic: plan/pump\n`, 'site.yaml');
const plant = plantMessages(150);
const at = (tick: number): number => (FIRST_TICK + tick) * site.tickMs;

function start() {
  const disk = new MemoryDisk();
  const keeper = new BundleKeeper(disk, 'data', site, trusted);
  const stream = new Uint8Array(8).fill(9);
  const options = {
    site,
    gateway: 'g1',
    disk,
    folder: 'data',
    segmentTicks: 40,
    spoolBytes: 1e9,
    stream,
    note: () => {},
  };
  const engine = new Engine(options, keeper);
  const offered = keeper.offer(sealedOf(1, { response: true }), null);
  if (offered.outcome === 'accepted') engine.install(offered.checked);
  const feed = (from: number, to: number, each: () => void = () => {}): void => {
    for (let n = from; n < to; n++) {
      for (const { topic, payload, timeMs } of plant[n]!) engine.message(topic, payload, timeMs, null);
      engine.close(at(n + 1) + site.latenessMs);
      engine.settle();
      each();
    }
  };
  const answerer = new Answerer();
  const put = (question: object) => ask(answerer, engine.serving!, engine.plans, site, question);
  return { engine, disk, feed, put };
}

const planOf = (from: number, value: number, count = 200) => ({
  start: at(from),
  step: '1min',
  values: new Array(count).fill(value),
});
const message = (one: object): Uint8Array => bytes(one);

describe('inside a gateway', () => {
  test('plans, filter, bounds, record and segments are the same to the bit with thousands of questions', () => {
    const pictures = [0, 20].map((questions) => {
      const run = start();
      run.feed(0, 50);
      run.engine.plan('plan/pump', message(planOf(50, 18)), at(50));
      run.feed(50, 150, () => {
        for (let k = 0; k < questions; k++) run.put({ plans: { pump: 10 + k } });
      });
      const { serving, plans } = run.engine;
      const forecasts = paths(serving!, plans, site);
      run.engine.stop();
      return {
        forecasts,
        record: [plans.record(0).error, plans.record(0).count],
        state: saveState(serving!.model, serving!.state),
        bounds: saveBounds(serving!.model, serving!.bounds),
        segments: run.disk
          .list('data/spool')
          .map((name) => Buffer.from(segmentHash(run.disk.read(`data/spool/${name}`)!))),
      };
    });
    expect(pictures[0]!.segments.length).toBeGreaterThan(2);
    expect(pictures[1]).toEqual(pictures[0]);
  });

  test('says what the forecast would be if the plan were really taken, beside what it is', () => {
    const [asked, told] = [start(), start()];
    for (const run of [asked, told]) run.feed(0, 60);
    const answer = asked.put({ plans: { pump: planOf(60, 20) }, id: 'q1' });
    const stands = paths(told.engine.serving!, told.engine.plans, site).map((text) => JSON.parse(text));
    expect(answer.signals!.map(({ present }) => present.median)).toEqual(stands.map(({ median }) => median));
    told.engine.plan('plan/pump', message(planOf(60, 20)), at(60));
    const under = paths(told.engine.serving!, told.engine.plans, site).map((text) => JSON.parse(text));
    expect(answer.signals!.map(({ median, lower, upper, limits }) => ({ median, lower, upper, limits }))).toEqual(
      under.map(({ median, lower, upper, limits }) => ({ median, lower, upper, limits })),
    );
    expect(answer.signals![0]!.median).not.toEqual(answer.signals![0]!.present.median);
    expect(answer).toMatchObject({ asker: 'test', id: 'q1', outcome: 'answered', coverage: 0.9, tick_s: 60 });
    expect(answer.origin).toBe(new Date(at(59)).toISOString());
    expect(answer.inputs_ahead).toMatchObject([{ input: 'pump', use: 'planned', plan_error: null }]);
    // As wide around either path, clips apart.
    const [one] = answer.signals!;
    for (const h of [0, 10, 23])
      expect(one!.upper[h]! - one!.median[h]!).toBeCloseTo(one!.present.upper[h]! - one!.present.median[h]!, 3);
  });

  test('without the plan that rules; fewer steps, one signal', () => {
    const [asked, told] = [start(), start()];
    for (const run of [asked, told]) run.feed(0, 60);
    const before = JSON.parse(paths(told.engine.serving!, told.engine.plans, site)[1]!);
    asked.engine.plan('plan/pump', message(planOf(60, 20)), at(60));
    const answer = asked.put({ plans: { pump: null }, horizon: 5, signals: ['flow'] });
    expect(answer.signals!.map(({ signal, median }) => [signal, median])).toEqual([
      ['flow', before.median.slice(0, 5)],
    ]);
    expect(answer.inputs_ahead).toMatchObject([{ use: 'expected', plan_until: null }]);
    expect(answer.signals![0]!.present.median).not.toEqual(before.median.slice(0, 5));
  });

  test('a plan beyond what the model was trained on carries S and says where', () => {
    const run = start();
    run.feed(0, 60);
    const high = run.engine.serving!.model.clipHigh[2]!;
    const far = run.put({ plans: { pump: { values: [...new Array(10).fill(high - 1), high + 3] } } });
    expect(far.quality).toBe('S');
    expect(far.quality_reason).toMatch(
      /^pump: the plan leaves the trained range, [-\d.]+ to [\d.]+ m, with [\d.]+ at step 11$/,
    );
    // Not looked at by an answer that ends before.
    expect(
      run.put({ plans: { pump: { values: [...new Array(10).fill(high - 1), high + 3] } }, horizon: 10 }).quality,
    ).toBeUndefined();
    expect(run.put({ plans: { pump: high - 1 } }).quality).toBeUndefined();
  });
});
