/** Who gets an answer, where it goes, how often one may ask, and what is counted. */
import { parseAnswerMessage, parseSite, topicsOf } from '@stillwell/protocol';
import { modelFromBundle } from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { PlanKeeper } from '../../../runtime/ingest/plans.ts';
import type { Outgoing } from '../../../runtime/mqtt/connection.ts';
import { Allowances } from '../../../runtime/questions/allowances.ts';
import { Questions } from '../../../runtime/questions/questions.ts';
import { responseTopicFault } from '../../../runtime/questions/response-topic.ts';
import { Serving } from '../../../runtime/serving.ts';
import { syntheticBundle } from '../../support/models.ts';
import { SITE_TEXT } from '../../support/running-site.ts';

const site = parseSite(SITE_TEXT, 'site');
const topics = topicsOf(site.root, site.site);
const bundle = syntheticBundle({ signals: ['level', 'flow'], inputs: ['pump'], tickMs: 60_000, response: true });
const checked = { bundle, model: modelFromBundle(bundle), digest: new Uint8Array(32), epoch: 1, sequence: 3 };
const TICK = 29_000_000;
const PLAIN = { retain: false, responseTopic: null, correlationData: null };
const bytes = (value: unknown): Uint8Array => new TextEncoder().encode(JSON.stringify(value));
const asking = (asker: string, more: object = {}): Uint8Array => bytes({ asker, plans: { pump: 12 }, ...more });

function desk(hasBundle = true) {
  const serving = new Serving(checked);
  for (let t = 5; t >= 0; t--) serving.step(TICK - t, Float64Array.of(10, 10, 10));
  const plans = new PlanKeeper(site);
  const occasion = { site, gateway: 'g1', issuedAtMs: TICK * 60_000 + 70_000, isCatchingUp: false, plans, inputs: [] };
  const sent: Outgoing[] = [];
  const clock = { ms: 1e6 };
  const questions = new Questions({
    site,
    gateway: 'g1',
    topics,
    log: { debug: () => {}, info: () => {}, warn: () => {}, error: () => {} },
    monotonic: () => clock.ms,
    present: () => (hasBundle ? { serving, occasion } : null),
    nowMs: () => occasion.issuedAtMs,
    publish: async (message) => void sent.push(message),
  });
  const answers = () => sent.map(({ topic, payload }) => ({ topic, ...parseAnswerMessage(payload as Uint8Array) }));
  return { questions, sent, answers, clock };
}

describe('where an answer goes', () => {
  test('to the asker without a response topic; QoS 1, not retained', () => {
    const { questions, sent, answers } = desk();
    questions.take(asking('hmi-3', { id: 'q7' }), PLAIN);
    expect(sent).toMatchObject([
      { topic: topics.answers('hmi-3'), qos: 1, retain: false, contentType: 'application/json' },
    ]);
    expect(sent[0]).not.toHaveProperty('correlationData');
    expect(answers()[0]).toMatchObject({ kind: 'answer', outcome: 'answered', asker: 'hmi-3', id: 'q7', sequence: 3 });
    expect(questions.answered).toBe(1);
  });

  test('to the response topic with the correlation data', () => {
    const { questions, sent } = desk();
    const correlationData = Uint8Array.of(1, 2, 3);
    questions.take(asking('hmi-3'), { ...PLAIN, responseTopic: topics.answers('hmi-3/a/7'), correlationData });
    expect(sent).toMatchObject([{ topic: topics.answers('hmi-3/a/7'), correlationData }]);
  });

  test.each([
    ['a command of the plant', 'plant/pump/set'],
    ['a forecast', topics.forecast('level')],
    ['the bundle', topics.bundle],
    ['another site', 'stillwell/other/answers/x'],
    ['the level above', topics.answers('').slice(0, -1)],
    ['nothing below', topics.answers('')],
    ['a wildcard', topics.answers('+')],
    ['all of it', topics.answers('#')],
    ['something long', topics.answers('x'.repeat(600))],
    ['a character of no topic', topics.answers('a\0b')],
    ['nowhere', ''],
  ])('never to %s', (_, responseTopic) => {
    expect(responseTopicFault(topics, responseTopic)).toMatch(/^response topic: /);
    const { questions, answers } = desk();
    questions.take(asking('hmi-3'), { ...PLAIN, responseTopic });
    expect(answers()).toMatchObject([{ topic: topics.answers('hmi-3'), outcome: 'refused', cause: 'response-topic' }]);
    expect(questions.refused).toEqual({ 'response-topic': 1 });
  });

  test('a mark too long to carry back is refused, and not carried', () => {
    const { questions, sent, answers } = desk();
    questions.take(asking('a'), { ...PLAIN, correlationData: new Uint8Array(257) });
    expect(answers()).toMatchObject([{ cause: 'correlation-data', reason: expect.stringContaining('got 257') }]);
    expect(sent[0]).not.toHaveProperty('correlationData');
    questions.take(asking('a'), { ...PLAIN, correlationData: new Uint8Array(256) });
    expect(sent[1]!.correlationData).toHaveLength(256);
  });
});

describe('refused', () => {
  test('in an answer where the asker is known, else only counted', () => {
    const { questions, answers } = desk();
    questions.take(bytes({ asker: 'a', plans: { pmup: 1 } }), PLAIN);
    questions.take(new TextEncoder().encode('what if?'), PLAIN);
    questions.take(new Uint8Array(0), PLAIN);
    questions.take(new Uint8Array(70_000), PLAIN);
    questions.take(bytes({ plans: { pump: 1 } }), PLAIN);
    expect(answers()).toMatchObject([
      { topic: topics.answers('a'), cause: 'fields', reason: expect.stringContaining('did you mean "pump"?') },
    ]);
    expect(questions.refused).toEqual({ fields: 2, syntax: 2, size: 1 });
    expect(questions.answered).toBe(0);
  });

  test('retained ones: nobody waits', () => {
    const { questions, sent } = desk();
    questions.take(asking('a'), { ...PLAIN, retain: true });
    expect(sent).toEqual([]);
    expect(questions.refused).toEqual({ retained: 1 });
  });

  test('without a bundle', () => {
    const { questions, answers } = desk(false);
    questions.take(asking('a'), PLAIN);
    expect(answers()).toMatchObject([{ cause: 'no-forecast', quality: 'F', bundle: null }]);
  });
});

describe('how often', () => {
  test('one asker, then another, then all together', () => {
    const { questions, answers, clock } = desk();
    for (let k = 0; k < 12; k++) questions.take(asking('a'), PLAIN);
    expect(questions.answered).toBe(10);
    expect(answers().slice(10)).toMatchObject([{ cause: 'asker-rate' }, { cause: 'asker-rate' }]);
    questions.take(asking('b'), PLAIN);
    expect(questions.answered).toBe(11);
    clock.ms += 2000;
    for (let k = 0; k < 2; k++) questions.take(asking('a'), PLAIN);
    expect(questions.answered).toBe(12);
    for (let k = 0; k < 30; k++) questions.take(asking(`c${k}`), PLAIN);
    expect(questions.refused.rate).toBeGreaterThan(5);
    expect(answers().at(-1)).toMatchObject({ cause: 'rate', reason: expect.stringContaining('ask again later') });
  });

  test('a flood is not even read, and answers to it dry up', () => {
    const { questions, sent, clock } = desk();
    for (let k = 0; k < 10_000; k++) questions.take(asking('a'), PLAIN);
    expect(questions.answered).toBe(10);
    expect(questions.refused).toEqual({ 'asker-rate': 40, flood: 9950 });
    expect(sent).toHaveLength(10 + 20);
    clock.ms += 60_000;
    questions.take(asking('b'), PLAIN);
    expect(questions.answered).toBe(11);
  });

  test('a hundred thousand askers are remembered by 64 places, the busy among them', () => {
    let ms = 0;
    const allowances = new Allowances(() => ms);
    for (let k = 0; k < 10; k++) allowances.refusalOf('busy');
    for (let k = 0; k < 100_000; k++) {
      allowances.refusalOf(`asker-${k}`);
      if (k % 50 === 0) expect(allowances.refusalOf('busy')?.cause).toBe('asker-rate');
    }
    expect(allowances.askers).toBe(64);
    ms += 1e6;
    expect(allowances.refusalOf('busy')).toBeNull();
  });
});
