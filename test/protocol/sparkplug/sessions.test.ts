/** Births, data and deaths of nodes and devices, in the orders in which they come. */
import { beforeEach, describe, expect, test } from 'vitest';
import { goodTest } from '../../../protocol/payload/good.ts';
import type { ReadingTarget } from '../../../protocol/reading-target.ts';
import { SparkplugSessions } from '../../../protocol/sparkplug/sessions.ts';
import { parseSparkplugSource, parseSparkplugTopic, sparkplugFilters } from '../../../protocol/sparkplug/topic.ts';
import { type MadeMetric, sparkplugBytes, sparkplugTopic } from '../../support/sparkplug.ts';

const NODE = { group: 'g', node: 'n', device: null };
const DEVICE = { group: 'g', node: 'n', device: 'd' };
const LEVEL = { source: DEVICE, channel: 0, metric: 'Tank/Level', isGood: null, conversion: null };
const FLOW = { source: DEVICE, channel: 1, metric: 'Flow', isGood: null, conversion: null };
const VOLTS = { source: NODE, channel: 2, metric: 'Supply Voltage', isGood: null, conversion: null };

let sessions: SparkplugSessions;
let said: string[];
beforeEach(() => {
  sessions = new SparkplugSessions([LEVEL, FLOW, VOLTS]);
  said = [];
});

const target: ReadingTarget = {
  take: (channel, value, timeMs) => void said.push(`${channel} ${value} ${timeMs}`),
  refuse: (channel, reason) => void said.push(`${channel} ${reason}`),
};

function send(tail: string, metrics: readonly MadeMetric[], seq?: number, timestamp = 1000): string[] {
  said = [];
  const topic = tail.startsWith('$') ? tail : `spBv1.0/g/${tail}`;
  const bytes = sparkplugBytes({ timestamp, metrics, ...(seq === undefined ? {} : { seq }) });
  sessions.take(sparkplugTopic(topic), bytes, target);
  return said;
}

const bdSeq = (value: number): MadeMetric => ({ name: 'bdSeq', type: 'UInt64', value });
const level = (more: Partial<MadeMetric>): MadeMetric => ({ type: 'Double', value: 1.5, ...more });
const birth = (alias: number, value = 1) => level({ name: 'Tank/Level', alias, value });
const nodeBirth = (number: number, seq = 0) =>
  send('NBIRTH/n', [bdSeq(number), { name: 'Supply Voltage', alias: 90, type: 'Float', value: 12 }], seq);

describe('births', () => {
  test('name, alias and type: their values are readings, and data by alias follow', () => {
    expect(nodeBirth(4)).toEqual(['2 12 1000']);
    expect(send('DBIRTH/n/d', [birth(7), { name: 'Flow', type: 'Int16', value: -3, timestamp: 900 }], 1)).toEqual([
      '0 1 1000',
      '1 -3 900',
    ]);
    expect(send('DDATA/n/d', [level({ alias: 7, value: 2, timestamp: 1100 })], 2)).toEqual(['0 2 1100']);
    expect(send('DDATA/n/d', [{ name: 'Flow', type: 'Int16', value: 4 }], 3)).toEqual(['1 4 1000']);
    expect(send('NDATA/n', [{ alias: 90, type: 'Float', value: 11 }], 4)).toEqual(['2 11 1000']);
    expect(sessions.counts).toEqual({ births: 2, deaths: 0, gaps: 0, missed: 0, repeated: 0, unreadable: 0 });
  });

  test('data before one are refused, once a message for each signal of the device', () => {
    expect(send('DDATA/n/d', [level({ alias: 7 })], 5)).toEqual(['0 unborn', '1 unborn']);
    expect(send('DDATA/n/d', [level({ name: 'Tank/Level' })], 6)).toEqual(['0 unborn', '1 unborn']);
    expect(send('NDATA/n', [], 7)).toEqual(['2 unborn']);
    send('DBIRTH/n/d', [birth(7)], 8);
    expect(send('DDATA/n/d', [level({ alias: 7 })], 9)).toEqual(['0 1.5 1000']);
  });

  test('a new one forgets the aliases before it', () => {
    nodeBirth(4);
    send('DBIRTH/n/d', [birth(7)], 1);
    send('DBIRTH/n/d', [birth(8), { name: 'Other', alias: 7, type: 'Double', value: 99 }], 2);
    expect(send('DDATA/n/d', [level({ alias: 7, value: 99 })], 3)).toEqual([]);
    expect(send('DDATA/n/d', [level({ alias: 8, value: 3 })], 4)).toEqual(['0 3 1000']);
  });

  test('a new one of the node forgets its devices until theirs', () => {
    nodeBirth(4);
    send('DBIRTH/n/d', [birth(7)], 1);
    nodeBirth(5);
    expect(send('DDATA/n/d', [level({ alias: 7 })], 1)).toEqual(['0 unborn', '1 unborn']);
    send('DBIRTH/n/d', [birth(7)], 2);
    expect(send('DDATA/n/d', [level({ alias: 7 })], 3)).toEqual(['0 1.5 1000']);
  });

  test('a metric that the birth did not name is refused', () => {
    send('DBIRTH/n/d', [birth(7)], 1);
    expect(send('DDATA/n/d', [{ name: 'Flow', type: 'Int16', value: 4 }], 2)).toEqual(['1 unborn']);
  });

  test('an alias that comes with another datatype means another metric now', () => {
    send('DBIRTH/n/d', [birth(7)], 1);
    expect(send('DDATA/n/d', [{ alias: 7, type: 'Boolean', value: true }], 2)).toEqual(['0 unborn']);
  });

  test('aliases past 2^53 are told apart', () => {
    // Two aliases of 64 bits that a float64 cannot tell apart, by hand: field 2 of the metric, ten bytes.
    const metric = (last: number, tail: number[]) => {
      const alias = [0x10, last, 0x80, 0x80, 0x80, 0x80, 0x80, 0x80, 0x80, 0x80, 0x01];
      return [0x12, alias.length + tail.length, ...alias, ...tail];
    };
    const float = [0x65, 0, 0, 0x80, 0x3f];
    const named = [0x0a, 4, 0x46, 0x6c, 0x6f, 0x77, 0x20, 9];
    const take = (type: string, ...bytes: number[]) => {
      said = [];
      sessions.take(sparkplugTopic(`spBv1.0/g/${type}/n/d`), Uint8Array.from(bytes), target);
      return said;
    };
    expect(take('DBIRTH', ...metric(0x81, [...named, ...float]))).toEqual(['1 1 NaN']);
    expect(take('DDATA', ...metric(0x82, float))).toEqual([]);
    expect(take('DDATA', ...metric(0x81, float))).toEqual(['1 1 NaN']);
  });

  test('of other nodes pass', () => {
    const bytes = sparkplugBytes({ seq: 0, metrics: [birth(1)] });
    expect(sessions.take(sparkplugTopic('spBv1.0/g/DBIRTH/other/d'), bytes, target)).toBe(false);
    expect(sessions.take(sparkplugTopic('spBv1.0/g/DBIRTH/n/other'), bytes, target)).toBe(true);
    expect(said).toEqual([]);
  });
});

describe('deaths', () => {
  test('of a device, then of the node: data are refused until the next birth', () => {
    nodeBirth(4);
    send('DBIRTH/n/d', [birth(7)], 1);
    send('DDEATH/n/d', [], 2);
    expect(send('DDATA/n/d', [level({ alias: 7 })], 3)).toEqual(['0 unborn', '1 unborn']);
    expect(send('NDATA/n', [{ alias: 90, type: 'Float', value: 11 }], 4)).toEqual(['2 11 1000']);
    send('NDEATH/n', [bdSeq(4)]);
    expect(send('NDATA/n', [{ alias: 90, type: 'Float', value: 11 }], 5)).toEqual(['2 unborn']);
    const states: string[] = [];
    sessions.states((channel, { state }) => states.push(`${channel} ${state}`));
    expect(states.sort()).toEqual(['0 gone', '1 gone', '2 gone']);
    expect(sessions.counts.deaths).toBe(2);
  });

  test('of an earlier session, delivered late, is passed over', () => {
    nodeBirth(5);
    send('NDEATH/n', [bdSeq(4)]);
    expect(sessions.counts.deaths).toBe(0);
    expect(send('NDATA/n', [{ alias: 90, type: 'Float', value: 11 }], 1)).toEqual(['2 11 1000']);
    send('NDEATH/n', [bdSeq(5)]);
    expect(sessions.counts.deaths).toBe(1);
  });

  test('without a birth heard, or without a number, counts', () => {
    send('DBIRTH/n/d', [birth(7)], 1);
    send('NDEATH/n', [bdSeq(3)]);
    expect(send('DDATA/n/d', [level({ alias: 7 })], 3)).toEqual(['0 unborn', '1 unborn']);
    nodeBirth(4);
    send('NDEATH/n', []);
    expect(sessions.counts.deaths).toBe(2);
  });
});

describe('numbers', () => {
  test('go round at 255, node and devices together, those nobody asks for among them', () => {
    nodeBirth(4);
    send('DBIRTH/n/d', [birth(7)], 1);
    for (let seq = 2; seq < 1000; seq++)
      send(seq % 3 === 0 ? 'DDATA/n/other' : 'DDATA/n/d', [level({ alias: 7 })], seq % 256);
    expect(sessions.counts).toMatchObject({ gaps: 0, missed: 0, repeated: 0 });
  });

  test('missing ones are counted, and what follows is taken', () => {
    nodeBirth(4);
    send('DBIRTH/n/d', [birth(7)], 1);
    expect(send('DDATA/n/d', [level({ alias: 7, value: 8 })], 5)).toEqual(['0 8 1000']);
    send('DDATA/n/d', [level({ alias: 7 })], 3);
    expect(sessions.counts).toMatchObject({ gaps: 2, missed: 3 + 253 });
  });

  test('a message that comes twice counts once', () => {
    send('DBIRTH/n/d', [birth(7)], 1);
    expect(send('DDATA/n/d', [level({ alias: 7 })], 2, 2000)).toHaveLength(1);
    expect(send('DDATA/n/d', [level({ alias: 7 })], 2, 2000)).toEqual([]);
    expect(send('DDATA/n/d', [level({ alias: 7 })], 2, 3000)).toHaveLength(1);
    expect(sessions.counts).toMatchObject({ repeated: 1, gaps: 1, missed: 255 });
  });
});

describe('values', () => {
  beforeEach(() => void send('DBIRTH/n/d', [birth(7)], 1));
  const data = (more: Partial<MadeMetric>) => send('DDATA/n/d', [level({ alias: 7, ...more })]);
  const quality = (value: unknown) => ({ properties: { Quality: { type: 'Int32', value } } });

  test('by quality: 192 or none is good', () => {
    expect([data(quality(192)), data(quality(0)), data(quality(500))]).toEqual([
      ['0 1.5 1000'],
      ['0 quality'],
      ['0 quality'],
    ]);
  });

  test('by a quality of the site file', () => {
    sessions = new SparkplugSessions([{ ...LEVEL, isGood: goodTest([192, 500]) }]);
    send('DBIRTH/n/d', [level({ name: 'Tank/Level', alias: 7, ...quality(192) })], 1);
    expect([data(quality(500)), data(quality(0)), data({})]).toEqual([['0 1.5 1000'], ['0 quality'], ['0 1.5 1000']]);
  });

  test('null, not a number, and of no such type are refused', () => {
    expect(data({ isNull: true, value: null })).toEqual(['0 absent']);
    expect(data({ value: Number.NaN })).toEqual(['0 value']);
    expect(send('DDATA/n/d', [{ name: 'Tank/Level', type: 'String', value: '5' }])).toEqual(['0 value']);
  });

  test('of history keep their own time', () => expect(data({ isHistorical: true, timestamp: 5 })).toEqual(['0 1.5 5']));

  test('are converted', () => {
    const conversion = { scale: 0.1, offset: 0, before: -32, num: 5, den: 9, after: 0 };
    sessions = new SparkplugSessions([{ ...LEVEL, conversion }]);
    expect(send('DBIRTH/n/d', [birth(7, 2120)], 1)).toEqual(['0 100 1000']);
  });

  test('for two channels of one metric', () => {
    sessions = new SparkplugSessions([LEVEL, { ...LEVEL, channel: 5 }]);
    expect(send('DBIRTH/n/d', [birth(7)], 1)).toEqual(['0 1 1000', '5 1 1000']);
    expect(data({ value: 2 })).toEqual(['0 2 1000', '5 2 1000']);
  });
});

describe('births that the broker kept', () => {
  const kept = (alias: number, timestamp: number) =>
    send('$sparkplug/certificates/spBv1.0/g/DBIRTH/n/d', [birth(alias, 55)], 1, timestamp);

  test('tell aliases, not values', () => {
    expect(kept(7, 500)).toEqual([]);
    expect(send('DDATA/n/d', [level({ alias: 7 })], 9)).toEqual(['0 1.5 1000']);
    expect(sessions.counts.gaps).toBe(0);
  });

  test('never stand above a live one, or a death', () => {
    send('DBIRTH/n/d', [birth(8)], 1, 600);
    kept(7, 500);
    expect(send('DDATA/n/d', [level({ alias: 8 })], 2)).toEqual(['0 1.5 1000']);
    send('DDEATH/n/d', [], 3);
    kept(7, 500);
    expect(send('DDATA/n/d', [level({ alias: 7 })], 4)).toEqual(['0 unborn', '1 unborn']);
  });
});

describe('a restart', () => {
  test('goes on from the births saved, as JSON', () => {
    nodeBirth(4);
    send('DBIRTH/n/d', [birth(7), { name: 'Flow', type: 'Int16', value: -3 }], 1);
    const saved = JSON.parse(JSON.stringify(sessions.save()));
    sessions = new SparkplugSessions([LEVEL, VOLTS]);
    sessions.restore(saved);
    expect(send('DDATA/n/d', [level({ alias: 7 })], 77)).toEqual(['0 1.5 1000']);
    send('NDEATH/n', [bdSeq(3)]);
    expect(send('NDATA/n', [{ alias: 90, type: 'Float', value: 11 }], 78)).toEqual(['2 11 1000']);
    send('NDEATH/n', [bdSeq(4)]);
    expect(send('NDATA/n', [{ alias: 90, type: 'Float', value: 11 }], 79)).toEqual(['2 unborn']);
  });
});

describe('topics', () => {
  test.each([
    ['spBv1.0/g/NBIRTH/n', { group: 'g', type: 'NBIRTH', node: 'n', device: null, isKept: false }],
    ['spBv1.0/a b/DDATA/n/d', { group: 'a b', type: 'DDATA', node: 'n', device: 'd', isKept: false }],
    [
      '$sparkplug/certificates/spBv1.0/g/DBIRTH/n/d',
      { group: 'g', type: 'DBIRTH', node: 'n', device: 'd', isKept: true },
    ],
  ])('%s', (text, topic) => expect(parseSparkplugTopic(text)).toEqual(topic));

  test.each([
    'spBv1.0/STATE/host',
    'spBv1.0/g/NCMD/n',
    'spBv1.0/g/DCMD/n/d',
    'spBv1.0/g/DDATA/n',
    'spBv1.0/g/NDATA/n/d',
    'spBv1.0/g/NDATA',
    'spBv1.0/g/DDATA/n/d/e',
    'spAv1.0/g/NDATA/n',
    'spBv1.0/g/NDATA/',
    'spBv1.0/g/DDATA/n/',
    '$sparkplug/certificates/spBv1.0/g/DDATA/n/d',
    'plant/x',
  ])('%s says nothing', (text) => expect(parseSparkplugTopic(text)).toBeNull());

  test('a source is subscribed with its node whole, and with what the broker keeps', () => {
    expect(sparkplugFilters(parseSparkplugSource('spBv1.0/g/+/n/d')!)).toEqual([
      'spBv1.0/g/+/n/#',
      '$sparkplug/certificates/spBv1.0/g/+/n/#',
    ]);
  });
});
