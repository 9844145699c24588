/** One message with many signals, quality, conversion, wildcards. */
import { Packr } from 'msgpackr';
import { describe, expect, test, vi } from 'vitest';
import { type DecodedSignal, MessageDecoder } from '../../protocol/message-decoder.ts';
import type { GoodRule } from '../../protocol/payload/good.ts';
import { refusalText } from '../../protocol/payload/refusal.ts';
import { AS_SENT, documentPayload } from '../../protocol/site.ts';
import { decodeOne } from '../support/decode-one.ts';

const json = (value: unknown): Uint8Array => new TextEncoder().encode(JSON.stringify(value));
const signal = (topic: string, more: Partial<DecodedSignal> = {}): DecodedSignal => ({
  topic,
  payload: { kind: 'number' },
  unit: '1',
  ...AS_SENT,
  ...more,
});

function said(decoder: MessageDecoder, topic: string, payload: Uint8Array): string[] {
  const lines: string[] = [];
  decoder.decode(topic, payload, {
    take: (channel, value, timeMs) => void lines.push(`${channel} ${value} ${timeMs}`),
    refuse: (channel, reason, at, got) => void lines.push(`${channel} ${reason} ${refusalText(reason, at, got)}`),
  });
  return lines;
}

describe('one message with many signals', () => {
  const member = (key: string) => signal('plc/frame', { payload: documentPayload('json', `/${key}`, '/t') });
  const decoder = new MessageDecoder([member('a'), member('b'), signal('plc/other'), member('c')]);

  test('is parsed once', () => {
    const parse = vi.spyOn(JSON, 'parse');
    expect(said(decoder, 'plc/frame', json({ a: 1, b: 2, c: 3, t: 5 }))).toEqual(['0 1 5', '1 2 5', '3 3 5']);
    expect(parse).toHaveBeenCalledTimes(1);
    parse.mockRestore();
  });

  test('gives the good ones where one is bad', () =>
    expect(said(decoder, 'plc/frame', json({ a: 'x', c: 3, t: 5 }))).toEqual([
      '0 value payload: at "/a": expected a number, got "x"',
      '1 absent payload: at "/b": expected a number, got nothing there',
      '3 3 5',
    ]));

  test('refuses each where it is no message at all', () =>
    expect(said(decoder, 'plc/frame', Uint8Array.of(0xff)).map((line) => line.slice(0, 8))).toEqual([
      '0 syntax',
      '1 syntax',
      '3 syntax',
    ]));

  test('may be read in two ways', () => {
    const both = new MessageDecoder([
      signal('x', { payload: documentPayload('json', '') }),
      signal('x'),
      signal('x', { payload: documentPayload('msgpack', '') }),
    ]);
    expect(said(both, 'x', new TextEncoder().encode('7'))).toEqual(['1 7 NaN', '0 7 NaN', '2 55 NaN']);
  });
});

describe('topics', () => {
  test('wildcards tell signals apart by level', () => {
    const decoder = new MessageDecoder([signal('plant/+/flow'), signal('plant/+/level'), signal('plant/#')]);
    expect(said(decoder, 'plant/p1/flow', json(1))).toEqual(['0 1 NaN', '2 1 NaN']);
    expect(said(decoder, 'plant/p2/level', json(2))).toEqual(['1 2 NaN', '2 2 NaN']);
    expect(said(decoder, 'other', json(2))).toEqual([]);
  });

  test('whether anybody listens is told', () => {
    const target = { take: () => {}, refuse: () => {} };
    const decoder = new MessageDecoder([signal('a')]);
    expect([decoder.decode('a', json('no'), target), decoder.decode('b', json(1), target)]).toEqual([true, false]);
  });

  test('a flood of them costs no memory', () => {
    const decoder = new MessageDecoder([signal('a/#')]);
    const before = process.memoryUsage().heapUsed;
    for (let i = 0; i < 30_000; i++) said(decoder, `a/${'x'.repeat(100)}${i}`, json(1));
    expect(process.memoryUsage().heapUsed - before).toBeLessThan(30e6);
  });
});

describe('quality', () => {
  const read = (good: GoodRule, quality: unknown, value: unknown = 1) => {
    const payload = { ...documentPayload('json', '/v'), quality: '/q', good };
    return decodeOne(signal('a', { payload }), json({ v: value, q: quality }));
  };
  const isGood = (good: GoodRule, quality: unknown): boolean => read(good, quality).reason === undefined;

  test.each([true, 'good', 'Good', 'GOOD', ' ok '])('%j is good unless said otherwise', (quality) =>
    expect(isGood(null, quality)).toBe(true),
  );
  test.each([false, null, undefined, 'bad', 'uncertain', '', 0, 1, 192, {}, ['good']])('%j is not', (quality) =>
    expect(isGood(null, quality)).toBe(false),
  );

  test('a list is compared as text in any case', () => {
    for (const quality of [192, '192', 'Good', 'gOOD', true]) expect(isGood([192, 'good', true], quality)).toBe(true);
    for (const quality of [0, 193, null, undefined, 'ok', false, {}])
      expect(isGood([192, 'good', true], quality)).toBe(false);
  });

  test('null in a list stands for none', () => {
    expect([isGood([null], undefined), isGood([null], null), isGood([null], 0)]).toEqual([true, true, false]);
  });

  // OPC 10000-4 table "StatusCode bit assignments" for the bits; 10000-6 v1.05 section 5.4.2.12 for JSON. The codes are
  // Good 0x00000000, GoodClamped 0x00300000, UncertainInitialValue 0x40920000, BadInvalidArgument 0x80AB0000.
  test.each<[unknown, boolean]>([
    [0, true],
    [0x00300000, true],
    [undefined, true],
    [null, true],
    [{}, true],
    [{ Code: 0x00300000 }, true],
    [0x40920000, false],
    [0x80ab0000, false],
    [-2_136_276_992, false],
    [{ Code: 0x80ab0000, Symbol: 'BadInvalidArgument' }, false],
    [{ Symbol: 'BadInvalidArgument' }, false],
    ['good', false],
    [true, false],
    [0.5, false],
    [2 ** 32, false],
  ])('OPC UA %j: %s', (quality, good) => expect(isGood('opc-ua', quality)).toBe(good));

  test('comes before the value, which is then often none', () =>
    expect(read([192], 0, null)).toEqual({
      reason: 'quality',
      text: 'payload: at "/q": expected good quality, got 0',
    }));
});

describe('conversion', () => {
  test('of a register in tenths of a degree Fahrenheit', () => {
    const payload = documentPayload('msgpack', '/0');
    const bytes = new Packr({ useRecords: false }).pack([2120]);
    expect(decodeOne(signal('a', { payload, unit: 'Cel', sentIn: '[degF]', scale: 0.1 }), bytes)).toEqual({
      value: 100,
      timeMs: null,
    });
  });

  test('past what a number holds is refused', () =>
    expect(decodeOne(signal('a', { scale: 1e300 }), json(1e300)).reason).toBe('value'));
});
