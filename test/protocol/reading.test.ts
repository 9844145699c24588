import { Packr } from 'msgpackr';
import { describe, expect, test } from 'vitest';
import { AS_SENT, documentPayload, type PayloadReading } from '../../protocol/site.ts';
import { decodeOne } from '../support/decode-one.ts';

const text = (content: string): Uint8Array => new TextEncoder().encode(content);
const bare: PayloadReading = { kind: 'number' };
const json = (value: string, time: string | null = null): PayloadReading => documentPayload('json', value, time);
const packed = (value: string, time: string | null = null): PayloadReading => documentPayload('msgpack', value, time);
const packr = new Packr({ useRecords: false });
const pack = (value: unknown): Uint8Array => packr.pack(value);

const read = (payload: PayloadReading, bytes: Uint8Array) =>
  decodeOne({ topic: 'a', payload, unit: '1', ...AS_SENT }, bytes);

describe('a reading', () => {
  test.each<[string, PayloadReading, Uint8Array, number, number | null]>([
    ['bare', bare, text('21.50'), 21.5, null],
    ['bare with space and sign', bare, text(' -0.5e1\r\n'), -5, null],
    ['bare without leading digits', bare, text('.25'), 0.25, null],
    ['the whole JSON payload', json(''), text('7'), 7, null],
    ['a JSON member', json('/d/0/v'), text('{"d":[{"v":3.25}]}'), 3.25, null],
    ['JSON truth as 1', json('/on'), text('{"on":true}'), 1, null],
    ['JSON untruth as 0', json('/on'), text('{"on":false}'), 0, null],
    ['decimal text in JSON', json('/v'), text('{"v":"12.75"}'), 12.75, null],
    ['JSON behind a byte order mark', json('/v'), Uint8Array.of(0xef, 0xbb, 0xbf, ...text('{"v":1}')), 1, null],
    [
      'JSON with an ISO time',
      json('/v', '/t'),
      text('{"v":1,"t":"2026-03-01T12:00:00+01:00"}'),
      1,
      Date.UTC(2026, 2, 1, 11),
    ],
    ['JSON with ms', json('/v', '/t'), text('{"v":1,"t":1772362800123.5}'), 1, 1_772_362_800_123.5],
    [
      'MessagePack as others write it',
      packed('/v', '/t'),
      pack({ v: 1.5, t: 1_772_362_800_000 }),
      1.5,
      1_772_362_800_000,
    ],
    ['MessagePack float 32', packed(''), Uint8Array.of(0xca, 0x3f, 0xc0, 0, 0), 1.5, null],
    [
      'deeply wrapped MessagePack',
      packed('/a/a/a/a/a/a/a/a/a/a'),
      pack({ a: { a: { a: { a: { a: { a: { a: { a: { a: { a: 2 } } } } } } } } } }),
      2,
      null,
    ],
  ])('%s', (_, how, payload, value, timeMs) => expect(read(how, payload)).toEqual({ value, timeMs }));

  test.each<[string, PayloadReading, Uint8Array, string, string]>([
    ['no bytes', bare, text(''), 'empty', 'expected a reading, got no bytes'],
    ['white space', bare, text('  '), 'value', 'expected a number, got ""'],
    ['a word', bare, text('offline'), 'value', 'expected a number, got "offline"'],
    ['a decimal comma', bare, text('21,5'), 'value', 'write the decimal point as "."'],
    ['NaN', bare, text('NaN'), 'value', 'got "NaN"'],
    ['infinity', bare, text('Infinity'), 'value', 'got "Infinity"'],
    ['past float64', bare, text('1e999'), 'value', 'got "1e999"'],
    ['hexadecimal', bare, text('0x10'), 'value', 'got "0x10"'],
    ['two numbers', bare, text('1 2'), 'value', 'got "1 2"'],
    ['malformed text', bare, Uint8Array.of(0x31, 0xff), 'syntax', 'UTF-8'],
    ['broken JSON', json('/v'), text('{"v":'), 'syntax', 'expected JSON text, got "{\\"v\\":"'],
    ['NaN in JSON', json('/v'), text('{"v":NaN}'), 'syntax', 'expected JSON text'],
    ['null', json('/v'), text('{"v":null}'), 'value', 'at "/v": expected a number, got null'],
    ['a missing member', json('/v'), text('{"w":1}'), 'absent', 'at "/v": expected a number, got nothing there'],
    ['a map', json('/v'), text('{"v":{}}'), 'value', 'at "/v": expected a number, got a map'],
    ['a number past float64', json('/v'), text('{"v":1e999}'), 'value', 'got Infinity'],
    ['a missing time', json('/v', '/t'), text('{"v":1}'), 'time', 'at "/t": expected an ISO 8601 time with zone'],
    [
      'a time without zone',
      json('/v', '/t'),
      text('{"v":1,"t":"2026-03-01T12:00:00"}'),
      'time',
      'got "2026-03-01T12:00:00"',
    ],
    ['a time past all calendars', json('/v', '/t'), text('{"v":1,"t":1e17}'), 'time', 'at "/t"'],
    ['JSON for MessagePack', packed('/v'), text('{"v":1}'), 'syntax', 'expected plain MessagePack'],
    ['MessagePack cut short', packed('/v'), pack({ v: 1.25 }).subarray(0, 6), 'syntax', 'cut short'],
    ['a MessagePack extension', packed(''), pack(new Date(0)), 'syntax', 'extension type'],
    ['too many bytes', bare, new Uint8Array(65_537).fill(0x31), 'size', 'at most 65536 bytes, got 65537'],
  ])('%s is refused', (_, how, payload, reason, message) => {
    const refused = read(how, payload);
    expect(refused.reason).toBe(reason);
    expect(refused.text).toContain(message);
    expect(refused.text!.length).toBeLessThan(200);
  });

  test('nesting without end is refused, not by a stack overflow', () => {
    const open = text('['.repeat(60_000));
    expect(read(json('/0'), open).reason).toBe('syntax');
    expect(read(packed('/0'), new Uint8Array(60_000).fill(0x91)).reason).toBe('syntax');
  });
});
