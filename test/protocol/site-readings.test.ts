/** The keys of a site file between payload and reading: what they give, and what a person is told about bad ones. */
import { readFileSync } from 'node:fs';
import { describe, expect, test } from 'vitest';
import { parseSite } from '../../protocol/site.ts';
import { refusalOf } from '../support/refusal.ts';

const file = (keys: string): string =>
  `site: a\ntime_zone: UTC\ntick: 1min\nhorizon: 2\nsignals:\n  - name: t\n${keys}`;
const parsed = (keys: string) => parseSite(file(keys)).signals[0]!;

describe('good keys', () => {
  test('quality with a list', () => {
    const { payload } = parsed('    payload: {msgpack: /v, quality: /q, good: [192, Good, true, null]}\n');
    expect(payload).toEqual({
      kind: 'msgpack',
      value: '/v',
      time: null,
      quality: '/q',
      good: [192, 'Good', true, null],
    });
  });

  test('quality by itself, and by OPC UA', () => {
    expect(parsed('    payload: {json: /v, quality: /q}\n').payload).toMatchObject({ quality: '/q', good: null });
    expect(parsed('    payload: {json: /v, quality: /q, good: opc-ua}\n').payload).toMatchObject({ good: 'opc-ua' });
  });

  test('a Sparkplug metric', () => {
    const { topic, payload } = parsed('    topic: spBv1.0/g/+/n/d\n    payload: {sparkplug: Tank/Level}\n');
    expect(topic).toBe('spBv1.0/g/+/n/d');
    expect(payload).toEqual({ kind: 'sparkplug', metric: 'Tank/Level', good: null });
  });

  test('units, scale, offset and a counter', () => {
    expect(parsed('    unit: Cel\n    sent_in: "[degF]"\n    scale: -0.1\n    offset: 40\n')).toMatchObject({
      sentIn: '[degF]',
      scale: -0.1,
      offset: 40,
    });
    expect(
      parsed('    aggregate: increment\n    wraps_at: 65536\n    scale: 0.1\n    unit: m3\n    sent_in: L\n'),
    ).toMatchObject({ wrapsAt: 65_536, sentIn: 'L' });
  });

  test('the examples of the documentation hold', () => {
    const text = readFileSync(new URL('../../protocol/README.md', import.meta.url), 'utf8');
    const blocks = [...text.matchAll(/```yaml\n([^`]*)```/g)].map(([, block]) => block!);
    const whole = blocks.filter((block) => block.startsWith('site:'));
    expect(whole.length).toBeGreaterThanOrEqual(2);
    for (const block of whole) expect(parseSite(block).signals.length).toBeGreaterThan(0);
  });
});

describe('bad keys', () => {
  test.each([
    [
      'payload: {json: /v, quality: q}',
      '7:34: signals[0].payload.quality: expected a JSON pointer such as "/value" or "" for the whole payload (did you mean "/q"?), got "q"',
    ],
    ['payload: {json: /v, qualty: /q}', '7:25: signals[0].payload.qualty is not a known key; did you mean "quality"?'],
    ['payload: {json: /v, good: [1]}', '7:31: signals[0].payload.good: expected good only beside quality'],
    [
      'payload: {json: /v, quality: /q, good: 192}',
      'expected a list of the values that count as good, such as [192, "good"], or opc-ua (did you mean [192]?), got 192',
    ],
    ['payload: {json: /v, quality: /q, good: []}', 'got []'],
    ['payload: {json: /v, quality: /q, good: [[1]]}', 'got [[1]]'],
    ['payload: {sparkplug: ""}', 'payload.sparkplug: expected a metric\'s name such as "Tank/Level", got ""'],
    ['payload: {sparkplug: 5}', 'got 5'],
    [
      'payload: {sparkplug: a, time: /t}',
      'payload.time: expected no time beside sparkplug, whose metrics carry their own, got one',
    ],
    ['payload: {sparkplug: a, quality: /q}', 'payload.quality: expected no quality beside sparkplug'],
    [
      'payload: {sparkplug: a, json: /v}',
      'expected one of the keys json, msgpack and sparkplug, got json and sparkplug',
    ],
    [
      'topic: spBv1.0/g/DDATA/n/d\n    payload: {sparkplug: a}',
      '7:12: signals[0].topic: expected "spBv1.0/GROUP/+/NODE" or "spBv1.0/GROUP/+/NODE/DEVICE", the + for the type of message (did you mean "spBv1.0/g/+/n/d"?), got "spBv1.0/g/DDATA/n/d"',
    ],
    ['topic: spBv1.0/g/+/+/d\n    payload: {sparkplug: a}', 'got "spBv1.0/g/+/+/d"'],
    ['topic: spBv1.0/g/+/n/d/e\n    payload: {sparkplug: a}', 'got "spBv1.0/g/+/n/d/e"'],
    ['topic: plant/t\n    payload: {sparkplug: a}', 'got "plant/t"'],
    ['scale: 0', '7:12: signals[0].scale: expected a number other than 0, got 0'],
    ['scale: .inf', 'got Infinity'],
    ['offset: a', '7:13: signals[0].offset: expected a number, got "a"'],
    [
      'unit: Cel\n    sent_in: bar',
      '8:14: signals[0].sent_in: expected a unit that converts to the signal\'s "Cel", got "bar", which measures something else',
    ],
    [
      'unit: Cel\n    sent_in: grad',
      '8:14: signals[0].sent_in: expected a UCUM unit that can be converted to "Cel", got "grad"; give its factor by scale instead',
    ],
    [
      'unit: NTU\n    sent_in: "1"',
      '7:11: signals[0].unit: expected a UCUM unit that can be converted from "1", got "NTU"; give its factor by scale instead',
    ],
    [
      'unit: K/h\n    sent_in: Cel/h',
      'signals[0].sent_in: expected a UCUM unit that can be converted to "K/h", got "Cel/h" (did you mean "K"?)',
    ],
    [
      'sent_in: °C',
      'signals[0].sent_in: expected a UCUM unit code in quotes if need be, without spaces (did you mean "Cel"?)',
    ],
    [
      'wraps_at: 65536',
      '7:15: signals[0].wraps_at: expected wraps_at only with the aggregate increment, for a counter, got the aggregate mean',
    ],
    ['aggregate: increment\n    wraps_at: 0', 'wraps_at: expected a number above 0, got 0'],
    [
      'aggregate: increment\n    offset: 1',
      'offset: expected none with the aggregate increment, where only differences count, got 1',
    ],
    ['aggregate: increment\n    scale: -1', 'scale: expected a number above 0 with the aggregate increment, got -1'],
    [
      'aggregate: increment\n    unit: K\n    sent_in: Cel',
      'sent_in: expected a unit that begins where "K" does, since only differences of a counter count, got "Cel"',
    ],
  ])('%s', (keys, message) => {
    const refusal = refusalOf(() => parseSite(file(`    ${keys}\n`), 'site.yaml'));
    expect(refusal.code).toBe('site-file');
    expect(refusal.message).toContain(message);
  });
});
