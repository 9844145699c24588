/** Asking from a shell: plans as people give them, and the answer as they see it. */
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { ADVISORY, answerMessage, parseAnswerMessage } from '@stillwell/protocol';
import { afterAll, describe, expect, test } from 'vitest';
import { readPlans } from '../../../trainer/desk/ask-plans.ts';
import { answerText } from '../../../trainer/desk/ask-view.ts';
import { head, T0 } from '../../support/messages.ts';

const folder = mkdtempSync(join(tmpdir(), 'stillwell-ask-'));
afterAll(() => rmSync(folder, { recursive: true, force: true }));
const file = (name: string, text: string): string => {
  const path = join(folder, name);
  writeFileSync(path, text);
  return `@${path}`;
};

describe('plans', () => {
  test.each<[string, unknown]>([
    ['pump=2.5', 2.5],
    ['pump=on', 1],
    ['pump=FALSE', 0],
    ['pump= -1e3 ', -1000],
    ['pump=none', null],
    ['pump=0,0,1,off', { values: [0, 0, 1, 0] }],
    ['pump=0,1/30min', { values: [0, 1], step: '30min' }],
    ['pump=3/1h', { values: [3], step: '1h' }],
    [
      `pump=${file('a.json', '{"start": "2026-03-01T12:00:00Z", "step": 60, "values": [1]}')}`,
      { start: '2026-03-01T12:00:00Z', step: 60, values: [1] },
    ],
    [`pump=${file('b.json', ' [{"time": 1772366400000, "value": true}]')}`, [{ time: 1772366400000, value: true }]],
    [
      `pump=${file('a.csv', 'time,pump\n2026-03-01T12:00:00Z,1\n2026-03-01T13:00:00+01:00;0\n\n'.replace(';', ','))}`,
      {
        points: [
          { time: '2026-03-01T12:00:00.000Z', value: 1 },
          { time: '2026-03-01T12:00:00.000Z', value: 0 },
        ],
      },
    ],
    [
      `pump=${file('b.csv', '2026-03-01T12:00:00Z;on\r\n')}`,
      { points: [{ time: '2026-03-01T12:00:00.000Z', value: 1 }] },
    ],
    [`pump=${file('c.csv', 'pump\n1\n2\n')}`, { values: [1, 2] }],
  ])('%s', (text, plan) => expect(readPlans([text])).toEqual({ pump: plan }));

  test('several inputs', () => expect(readPlans(['a=1', 'b=none'])).toEqual({ a: 1, b: null }));

  test.each<[string[], string]>([
    [['pump'], '--plan "pump": expected INPUT=VALUE to be held'],
    [['=1'], 'expected INPUT=VALUE'],
    [['pump='], 'expected INPUT=VALUE'],
    [['pump=high'], 'expected INPUT=VALUE'],
    [['pump=1,,2'], 'expected INPUT=VALUE'],
    [['pump=1/soon'], 'expected INPUT=VALUE'],
    [['pump=1/1h/2h'], 'expected INPUT=VALUE'],
    [['pump=1', 'pump=2'], 'expected one plan for each input, got a second one for "pump"'],
    [['pump=@/nowhere/plan.csv'], 'plan /nowhere/plan.csv: cannot be read (ENOENT)'],
    [[`pump=${file('bad.json', '{"values": [1,]}')}`], 'expected JSON, got what is none'],
    [[`pump=${file('empty.csv', 'time,value\n')}`], 'expected lines of time and value, got none'],
    [[`pump=${file('bad.csv', 'time,value\n2026-03-01T12:00:00Z,1\nnoon,2\n')}`], 'bad.csv:3: expected a time such as'],
    [[`pump=${file('wide.csv', '2026-03-01T12:00:00Z,1,2\n')}`], 'wide.csv:1: expected a time'],
    [[`pump=${file('large.csv', '1\n'.repeat(40_000))}`], 'expected at most 65536 bytes, got 80000'],
  ])('%s is refused', (texts, words) => expect(() => readPlans(texts)).toThrow(words));
});

test('the answer: both forecasts on one scale, limits of either, quality, the advisory mark', () => {
  const steps = Array.from({ length: 30 }, (_, h) => h);
  const around = (of: (h: number) => number) => ({
    median: steps.map(of),
    lower: steps.map((h) => of(h) - 1),
    upper: steps.map((h) => of(h) + 1),
  });
  const limit = (probability: number) => [{ limit: 'high_high' as const, value: 12, probability, timeMs: null }];
  const answer = parseAnswerMessage(
    answerMessage({
      ...head,
      quality: 'S',
      qualityReason: 'pump: the plan\u0007 leaves the trained range',
      asker: 'ask-1',
      id: null,
      originMs: T0,
      tickMs: 60_000,
      coverage: 0.9,
      inputsAhead: [
        { input: 'pump', unit: '1', use: 'planned', planAgeMs: 0, planUntilMs: T0, planError: null, usualError: null },
      ],
      signals: [
        {
          signal: 'level',
          unit: 'm',
          ...around((h) => h / 3),
          limits: limit(0.41),
          present: { ...around(() => 2), limits: limit(0.002) },
        },
      ],
    }),
  );
  const lines = answerText(answer, 60).split('\n');
  expect(lines[0]).toBe(
    'mill-lane: bundle number 4, origin 2026-03-01T12:00:00Z, quality S (pump: the plan? leaves the trained range)',
  );
  expect(lines[1]).toBe('inputs in the answer: pump planned');
  expect(lines).toContain('level in m');
  expect(lines).toContain(
    '  asked: +1 min 0 [-1 .. 1]   +15 min 4.667 [3.667 .. 5.667]   +30 min 9.667 [8.667 .. 10.67]',
  );
  expect(lines).toContain('  as it stands: +1 min 2 [1 .. 3]   +15 min 2 [1 .. 3]   +30 min 2 [1 .. 3]');
  expect(lines.filter((line) => line.startsWith('  crosses'))).toEqual(['  crosses high-high 12: 41 %']);
  const axes = lines.filter((line) => /^ +(10\.67|-1) /.test(line)).map((line) => line.trim().split(' ')[0]);
  expect(axes).toEqual(['10.67', '-1', '10.67', '-1']);
  expect(lines.at(-1)).toBe(ADVISORY);
});
