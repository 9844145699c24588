/** Whether a bundle belongs to a site: what the hash covers, and how a difference is told. */
import { createHash } from 'node:crypto';
import { describe, expect, test } from 'vitest';
import { toHex } from '../../protocol/digest.ts';
import { bundleSchemaHash, describeSchemaDifference, schemaHash } from '../../protocol/schema-hash.ts';
import { parseSite, type Site } from '../../protocol/site.ts';
import { sampleBundle } from '../support/sample-bundle.ts';

const bundle = sampleBundle();
const TEXT = `site: mill-lane
time_zone: UTC
tick: 1min
horizon: 6
signals:
  - {name: signal-1, unit: Cel}
  - {name: signal-2, unit: Cel}
inputs:
  - {name: input-1}
`;
const site = (from = '', to = ''): Site => parseSite(TEXT.replace(from, to));

describe('the schema hash', () => {
  test('is SHA-256 over a fixed line and the MessagePack of tick and channels', () => {
    // Second route: the bytes written out by hand.
    const text = (value: string): Buffer => Buffer.concat([Buffer.of(0xa0 | value.length), Buffer.from(value)]);
    const row = (...cells: string[]): Buffer => Buffer.concat([Buffer.of(0x94), ...cells.map(text)]);
    const packed = Buffer.concat([
      Buffer.of(0x82),
      text('channels'),
      Buffer.of(0x93),
      row('signal', 'signal-1', 'Cel', 'mean'),
      row('signal', 'signal-2', 'Cel', 'mean'),
      row('input', 'input-1', '1', 'last'),
      text('tickMs'),
      Buffer.of(0xcd, 0xea, 0x60),
    ]);
    const expected = createHash('sha256').update('stillwell schema v1\n').update(packed).digest('hex');
    expect(toHex(schemaHash(site()))).toBe(expected);
    expect(toHex(bundleSchemaHash(bundle))).toBe(expected);
  });

  test.each([
    ['topics', 'signal-1, unit: Cel', 'signal-1, unit: Cel, topic: a/b'],
    ['limits and range', 'signal-2, unit: Cel', 'signal-2, unit: Cel, range: [0, 9], limits: {high: 5}'],
    ['horizon and time zone', 'UTC\ntick: 1min\nhorizon: 6', 'Europe/Vienna\ntick: 60s\nhorizon: 12'],
  ])('does not change with %s', (_, from, to) => {
    expect(schemaHash(site(from, to))).toStrictEqual(schemaHash(site()));
    expect(describeSchemaDifference(bundle, site(from, to))).toBeNull();
  });

  test.each([
    ['tick', 'tick: 1min', 'tick: 2min', 'tick: the bundle has 1min, the site 2min'],
    [
      'a name',
      'name: signal-2',
      'name: signal-3',
      'channel 1 ("signal-2"), name: the bundle has signal-2, the site signal-3',
    ],
    [
      'a unit',
      'signal-1, unit: Cel',
      'signal-1, unit: K',
      'channel 0 ("signal-1"), unit: the bundle has Cel, the site K',
    ],
    [
      'an aggregate',
      '{name: input-1}',
      '{name: input-1, aggregate: sum}',
      'channel 2 ("input-1"), aggregate: the bundle has last, the site sum',
    ],
    [
      'order',
      'signal-1, unit: Cel}\n  - {name: signal-2',
      'signal-2, unit: Cel}\n  - {name: signal-1',
      'channel 0 ("signal-1"), name: the bundle has signal-1, the site signal-2',
    ],
    [
      'a signal more',
      'inputs:',
      '  - {name: extra}\ninputs:',
      'channel 2 ("input-1"), name: the bundle has input-1, the site extra',
    ],
    [
      'an input more',
      '{name: input-1}',
      '{name: input-1}\n  - {name: input-2}',
      'channel 3: the bundle has none, the site input "input-2"',
    ],
    ['an input less', 'inputs:\n  - {name: input-1}\n', '', 'channel 2: the bundle has input "input-1", the site none'],
    [
      'a role',
      'inputs:\n  - {name: input-1}',
      '  - {name: input-1, aggregate: last}',
      'channel 2 ("input-1"), role: the bundle has input, the site signal',
    ],
  ])('changes with %s, and the difference is named', (_, from, to, message) => {
    expect(schemaHash(site(from, to))).not.toStrictEqual(schemaHash(site()));
    expect(describeSchemaDifference(bundle, site(from, to))).toBe(message);
  });

  test('a bundle with a hash that its own channels do not give is told apart', () => {
    expect(describeSchemaDifference({ ...bundle, schema: new Uint8Array(32) }, site())).toContain(
      'another hash than its own',
    );
  });
});
