/** What a while of listening says, as collected, as a table, as data. */
import { beforeEach, describe, expect, test } from 'vitest';
import { parseSite } from '../../../protocol/site.ts';
import { heardData, heardLines } from '../../../runtime/commands/heard-text.ts';
import { HeardSite } from '../../../runtime/ingest/heard.ts';
import { nearestTopics } from '../../../runtime/ingest/nearest-topics.ts';
import { sparkplugBytes } from '../../support/sparkplug.ts';

const NOW = Date.UTC(2026, 2, 1, 12);
const site = parseSite(`site: dairy
time_zone: UTC
tick: 1min
horizon: 2h
signals:
  - {name: supply, topic: plc/frame, payload: {json: /a, time: /t, quality: /q, good: [192]}, unit: Cel, sent_in: "[degF]", range: [0, 120]}
  - {name: level, topic: plant/+/level}
  - {name: tank, topic: spBv1.0/g/+/n/d, payload: {sparkplug: Tank/Level}}
  - {name: fitted-only}
inputs:
  - {name: pump, topic: plant/cellar/pump, plan_topic: plan/pump}
`);

let heard: HeardSite;
beforeEach(() => {
  heard = new HeardSite(site);
});

const hear = (topic: string, payload: string | object | Uint8Array, isKept = false, nowMs = NOW): void => {
  const text = typeof payload === 'string' ? payload : JSON.stringify(payload);
  heard.message(topic, payload instanceof Uint8Array ? payload : Buffer.from(text), isKept, nowMs);
};
const birth = (name: string) =>
  sparkplugBytes({ timestamp: NOW, seq: 1, metrics: [{ name, alias: 1, type: 'Float', value: 2.5 }] });
const channel = (name: string) => heard.channels.find((one) => one.name === name)!;
const hintOf = (name: string) => heard.hint(heard.channels.findIndex((one) => one.name === name));

describe('signals', () => {
  test('readings, converted, with their own time or by arrival', () => {
    hear('plc/frame', { a: 212, q: 192, t: NOW - 5000 });
    hear('plant/a/level', '3.25', true);
    hear('plant/b/level', '4');
    expect(channel('supply')).toMatchObject({ readings: 1, last: { value: 100, timeMs: NOW - 5000, isKept: false } });
    expect(channel('level')).toMatchObject({ readings: 2, last: { value: 4, timeMs: null, arrivedMs: NOW } });
    expect([...channel('level').topics]).toEqual(['plant/a/level', 'plant/b/level']);
  });

  test('refusals by cause, with the last example', () => {
    hear('plc/frame', { a: 212, q: 0, t: NOW });
    hear('plc/frame', { a: 212, q: 64, t: NOW });
    hear('plc/frame', { a: 1000, q: 192, t: NOW });
    hear('plc/frame', 'no');
    expect([...channel('supply').refused]).toEqual([
      ['quality', { count: 2, example: 'payload: at "/q": expected good quality, got 64' }],
      ['above-range', { count: 1, example: expect.stringMatching(/^expected 0 to 120 Cel, got 537\.7/) }],
      ['syntax', { count: 1, example: 'payload: expected JSON text, got "no"' }],
    ]);
    expect(channel('supply').readings).toBe(0);
  });

  test('silent ones say which topics heard come nearest', () => {
    hear('plant/cellar/pmup', '1');
    hear('office/coffee', '1');
    expect(hintOf('pump')).toBe('did you mean plant/cellar/pmup?');
    expect([...heard.unmatched.keys()]).toEqual(['plant/cellar/pmup', 'office/coffee']);
    hear('plant/cellar/pump', '1');
    expect(hintOf('pump')).toBeNull();
    expect(hintOf('fitted-only')).toBe('no topic in the site file');
  });
});

describe('Sparkplug', () => {
  const data = () => sparkplugBytes({ timestamp: NOW, seq: 2, metrics: [{ alias: 1, type: 'Float', value: 3 }] });

  test('without a birth: refused, and why', () => {
    hear('spBv1.0/g/DDATA/n/d', data());
    expect([...channel('tank').refused.keys()]).toEqual(['unborn']);
    expect(hintOf('tank')).toMatch(/^no birth of g\/n\/d came; .*Node Control\/Rebirth.*never does$/);
  });

  test('with one, and after a death', () => {
    hear('spBv1.0/g/DBIRTH/n/d', birth('Tank/Level'));
    hear('spBv1.0/g/DDATA/n/d', data());
    expect(channel('tank')).toMatchObject({ readings: 2, last: { value: 3 } });
    expect(hintOf('tank')).toBeNull();
    hear('spBv1.0/g/DDEATH/n/d', sparkplugBytes({ timestamp: NOW, seq: 3 }));
    expect(hintOf('tank')).toBe('g/n/d has said goodbye, or the broker in its name');
  });

  test('with one that names the metric otherwise, or of another device', () => {
    hear('spBv1.0/g/DBIRTH/n/d', birth('Tank/Levle'));
    expect(hintOf('tank')).toBe('the birth of g/n/d names no metric "Tank/Level"; did you mean "Tank/Levle"?');
    heard = new HeardSite(site);
    hear('spBv1.0/g/DBIRTH/n/d2', birth('Tank/Level'));
    expect(hintOf('tank')).toBe('no birth of g/n/d came, but one of g/n/d2');
  });
});

describe('plans', () => {
  test('taken, refused, silent', () => {
    hear('plan/pumps', '1');
    expect(heard.planHint(heard.plans[0]!)).toBe('did you mean plan/pumps?');
    hear('plan/pump', { start: '2026-03-01T12:00:00Z', step: '15min', values: [0, 1] }, true);
    hear('plan/pump', '{');
    expect(heard.plans[0]).toMatchObject({ name: 'pump', readings: 1 });
    expect([...heard.plans[0]!.refused.keys()]).toEqual(['syntax']);
    expect(heard.planHint(heard.plans[0]!)).toBeNull();
  });
});

describe('what nobody takes', () => {
  test('is shown in a few words, whatever it is; our own topics are passed over', () => {
    hear('x/text', `a\nlong ${'text '.repeat(30)}`);
    hear('x/bytes', Uint8Array.of(0, 1, 2));
    hear('x/nothing', '');
    hear('stillwell/dairy/state', '{}');
    expect([...heard.unmatched].map(([topic, { example }]) => [topic, example])).toEqual([
      ['x/text', 'a long text text text text text text te…'],
      ['x/bytes', '3 bytes'],
      ['x/nothing', ''],
    ]);
  });

  test('is bounded', () => {
    for (let i = 0; i < 1000; i++) hear(`flood/${i}`, '1');
    expect(heard.unmatched.size).toBe(200);
    expect(heard.moreTopics).toBe(800);
  });
});

describe('shown', () => {
  beforeEach(() => {
    hear('plc/frame', { a: 212, q: 192, t: NOW - 5000 });
    hear('plc/frame', { a: 212, q: 0, t: NOW });
    for (let i = 0; i < 20; i++) hear(`plant/${i % 2}/level`, '3.0000000004');
    hear('plan/pump', { start: '2026-03-01T12:00:00Z', step: '15min', values: [0, 1] });
    hear('plant/cellar/pumb', 'on');
  });

  test('as a table', () => {
    expect(heardLines(heard, 10, NOW)).toEqual([
      '              readings         last     time                   topic',
      'supply        1, every 10.0 s  100 Cel  5.0 s ago, own time    plc/frame',
      '  refused 1 × quality: payload: at "/q": expected good quality, got 0',
      'level         20, 2/s          3 1      0.0 s ago, by arrival  plant/+/level, 2 topics such as plant/0/level',
      expect.stringMatching(/^tank {10}- .*spBv1\.0\/g\/\+\/n\/d$/),
      expect.stringMatching(/^ {2}no birth of g\/n\/d came; /),
      expect.stringMatching(/^fitted-only +- +- +- +-$/),
      '  no topic in the site file',
      expect.stringMatching(/^pump {10}- .*plant\/cellar\/pump$/),
      '  did you mean plant/cellar/pumb?',
      expect.stringMatching(/^plan of pump +1 +- +- +plan\/pump$/),
      '',
      'heard, and taken by no signal:',
      '  plant/cellar/pumb  1 × on',
    ]);
  });

  test('a clock that is ahead, and ages of any length', () => {
    const time = (timeMs: number) => {
      hear('plc/frame', { a: 212, q: 192, t: timeMs });
      return /(?:Cel {2})(.*?), own time/.exec(heardLines(heard, 10, NOW)[1]!)![1];
    };
    expect([-500, -3_600_000 * 3, 90_000, 600_000, 86_400_000 * 20].map((age) => time(NOW - age))).toEqual([
      '0.0 s ago',
      '3 h ahead',
      '90.0 s ago',
      '10 min ago',
      '20 d ago',
    ]);
  });

  test('as data', () => {
    const data = JSON.parse(JSON.stringify(heardData(heard, 10, NOW))) as Record<string, { [key: string]: unknown }[]>;
    expect(data.heard![0]).toEqual({
      name: 'supply',
      role: 'signal',
      topic: 'plc/frame',
      topics: ['plc/frame'],
      readings: 1,
      per_second: 0.1,
      last: {
        value: 100,
        unit: 'Cel',
        time: '2026-03-01T11:59:55.000Z',
        time_source: 'payload',
        age_s: 5,
        retained: false,
      },
      refused: [{ cause: 'quality', count: 1, example: 'payload: at "/q": expected good quality, got 0' }],
      hint: null,
    });
    expect(data.plans).toMatchObject([{ input: 'pump', topic: 'plan/pump', plans: 1, refused: [] }]);
    expect(data.unmatched).toEqual([{ topic: 'plant/cellar/pumb', count: 1, example: 'on' }]);
  });
});

test('nearest topics', () => {
  const topics = ['plant/cellar/level', 'plant/cellar/flow', 'Plant/Cellar/Pump', 'plant/x/y', 'a', ''];
  expect(nearestTopics('plant/cellar/flwo', topics)[0]).toBe('plant/cellar/flow');
  expect(nearestTopics('plant/cellar/pump', topics)[0]).toBe('Plant/Cellar/Pump');
  expect(nearestTopics('cellar/level', topics)[0]).toBe('plant/cellar/level');
  expect(nearestTopics('other/thing', topics)).toEqual([]);
});
