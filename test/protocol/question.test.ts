/** Questions and answers: what is understood, what is refused and by which cause, and what an answer looks like. */
import { describe, expect, test } from 'vitest';
import { type AnswerFacts, answerMessage, parseAnswerMessage, refusalMessage } from '../../protocol/answer.ts';
import { parseQuestion, type QuestionRules } from '../../protocol/question.ts';
import { parseSite } from '../../protocol/site.ts';
import { ADVISORY } from '../../protocol/version.ts';
import { head, json, T0 } from '../support/messages.ts';
import { refusalOf } from '../support/refusal.ts';

const site = parseSite(
  `site: mill-lane
time_zone: UTC
tick: 1min
horizon: 2h
signals: [{name: level}, {name: flow}]
inputs: [{name: rain, range: [0, 50]}, {name: pump}]
`,
  'site',
);
const START = T0 + 60_000;
const rules: QuestionRules = { site, nowMs: T0 + 70_000, startMs: START };
const bytes = (value: unknown): Uint8Array =>
  new TextEncoder().encode(typeof value === 'string' ? value : JSON.stringify(value));
const ask = (more: object, plans: object = { pump: 1 }) =>
  parseQuestion(bytes({ asker: 'hmi-3', plans, ...more }), rules);

describe('understood', () => {
  test('all that may be left out', () => {
    expect(ask({})).toMatchObject({ asker: 'hmi-3', id: null, steps: 120, signals: [0, 1] });
    expect(ask({ id: 'a', horizon: '30min', signals: ['flow', 'flow'] })).toMatchObject({
      id: 'a',
      steps: 30,
      signals: [1],
    });
    expect(ask({ horizon: 7 }).steps).toBe(7);
    expect(ask({ horizon: '3d' }).steps).toBe(120);
    expect(ask({ horizon: '1s' }).steps).toBe(1);
  });

  test.each<[string, unknown, { timesMs: number[]; values: number[]; endMs: number } | null]>([
    ['a value held', 2.5, { timesMs: [START], values: [2.5], endMs: START + 7_200_000 }],
    ['a switch held', true, { timesMs: [START], values: [1], endMs: START + 7_200_000 }],
    [
      'values from the next tick on',
      { values: [0, 1] },
      { timesMs: [START, START + 60_000], values: [0, 1], endMs: START + 120_000 },
    ],
    [
      'with a step',
      { values: [0, 1], step: '15min' },
      { timesMs: [START, START + 900_000], values: [0, 1], endMs: START + 1_800_000 },
    ],
    [
      'a whole plan',
      { start: '2026-03-01T13:00:00Z', step: 60, values: [3] },
      { timesMs: [T0 + 3_600_000], values: [3], endMs: T0 + 3_660_000 },
    ],
    ['points', [{ time: T0 + 120_000, value: 4 }], { timesMs: [T0 + 120_000], values: [4], endMs: T0 + 180_000 }],
    ['no plan', null, null],
  ])('%s', (_, given, plan) => {
    const [one] = ask({}, { pump: given }).plans;
    expect(one!.input).toBe(1);
    if (plan === null) expect(one!.plan).toBeNull();
    else expect(one!.plan).toMatchObject(plan);
  });
});

describe('refused', () => {
  test.each<[string, unknown, string, string, string | null]>([
    ['no JSON', 'what if?', 'syntax', 'expected JSON text in UTF-8, got 8 other bytes', null],
    ['a list', [], 'fields', 'expected', null],
    ['nobody', { plans: { pump: 1 } }, 'fields', 'asker: expected a name of letters', null],
    ['a topic for a name', { asker: 'a/b', plans: { pump: 1 } }, 'fields', 'got "a/b"', null],
    ['no plans', { asker: 'a' }, 'fields', 'plans: expected a map of inputs and their plans, one at least', 'a'],
    ['an empty map', { asker: 'a', plans: {} }, 'fields', 'plans: expected a map', 'a'],
    ['a list of plans', { asker: 'a', plans: [1] }, 'fields', 'plans: expected a map', 'a'],
    [
      'an unknown input',
      { asker: 'a', plans: { pmup: 1 } },
      'fields',
      'plans: no such name, "pmup"; did you mean "pump"?',
      'a',
    ],
    ['a signal for an input', { asker: 'a', plans: { level: 1 } }, 'fields', 'did you mean one of rain, pump', 'a'],
    ['an inherited name', { asker: 'a', plans: { constructor: 1 } }, 'fields', 'no such name, "constructor"', 'a'],
    [
      'an unknown signal',
      { asker: 'a', plans: { pump: 1 }, signals: ['lvel'] },
      'fields',
      'signals: no such name, "lvel"; did you mean "level"?',
      'a',
    ],
    ['no signals', { asker: 'a', plans: { pump: 1 }, signals: [] }, 'fields', 'signals: expected a list', 'a'],
    [
      'no steps',
      { asker: 'a', plans: { pump: 1 }, horizon: 0 },
      'fields',
      'horizon: expected a whole number of ticks',
      'a',
    ],
    ['a mistyped key', { asker: 'a', horizn: 2, plans: { pump: 1 } }, 'fields', 'did you mean "horizon"?', 'a'],
    [
      'a long mark',
      { asker: 'a', id: 'x'.repeat(65), plans: { pump: 1 } },
      'fields',
      'id: expected text of at most 64 bytes',
      'a',
    ],
    ['a text for a plan', { asker: 'a', plans: { pump: 'on' } }, 'plan', 'plans.pump: plan: ', 'a'],
    [
      'beyond the range',
      { asker: 'a', plans: { rain: 51 } },
      'plan',
      "expected 0 to 50, the input's range, got 51",
      'a',
    ],
    [
      'in the past',
      { asker: 'a', plans: { pump: { start: '2026-02-01T00:00:00Z', values: [1] } } },
      'plan',
      'expected values ahead of',
      'a',
    ],
    [
      'endless',
      { asker: 'a', plans: { pump: { values: new Array(4097).fill(1) } } },
      'plan',
      'expected at most 4096, got 4097',
      'a',
    ],
    ['huge', `"${'x'.repeat(70_000)}"`, 'size', 'expected at most 65536 bytes', null],
  ])('%s', (_, given, reason, words, asker) => {
    const refusal = refusalOf(() => parseQuestion(bytes(given), rules));
    expect(refusal.code).toBe('question');
    expect(refusal.message).toContain(words);
    expect(refusal.message).toMatch(/^question: [^\n]*$/);
    expect(refusal.details).toEqual({ reason, asker });
  });
});

describe('the answer', () => {
  const paths = { median: [1, 2], lower: [0, 1], upper: [2, 3], limits: [] };
  const limit = { limit: 'high' as const, value: 5, probability: 0.25, timeMs: null };
  const facts: AnswerFacts = {
    ...head,
    asker: 'hmi-3',
    id: null,
    originMs: T0,
    tickMs: 60_000,
    coverage: 0.9,
    inputsAhead: [],
    signals: [{ signal: 'level', unit: 'm', ...paths, limits: [limit], present: paths }],
  };
  test('reads back to itself, with the advisory mark', () => {
    const message = json(answerMessage(facts));
    expect(message).toMatchObject({ kind: 'answer', outcome: 'answered', asker: 'hmi-3', advisory: ADVISORY });
    expect(message).not.toHaveProperty('id');
    expect(parseAnswerMessage(answerMessage(facts))).toEqual(message);
    const refusal = refusalMessage({ ...facts, id: 'a' }, { cause: 'rate', reason: 'too many' });
    expect(parseAnswerMessage(refusal)).toMatchObject({
      outcome: 'refused',
      id: 'a',
      cause: 'rate',
      reason: 'too many',
    });
  });
  test.each<[string, object, string]>([
    ['a refusal without a cause', { outcome: 'refused' }, 'expected cause and reason of a refusal'],
    [
      'a refusal with forecasts',
      { outcome: 'refused', cause: 'a', reason: 'b' },
      'expected a refusal without forecasts',
    ],
    ['an answer with a cause', { cause: 'rate' }, 'expected no cause in an answer'],
    ['an answer of nothing', { signals: undefined }, 'expected signals, got none'],
    ['an answer from nowhere', { origin: undefined }, 'expected origin, tick_s'],
    [
      'a short path',
      { signals: [{ signal: 'level', unit: 'm', ...paths, lower: [0], present: paths }] },
      'expected 2 steps in every path',
    ],
  ])('%s is refused', (_, more, words) => {
    const message = { ...json(answerMessage(facts)), ...more };
    expect(refusalOf(() => parseAnswerMessage(bytes(message))).message).toContain(words);
  });
});
