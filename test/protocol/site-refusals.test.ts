/** Reading site files: what a person is told about a bad one. */
import { describe, expect, test } from 'vitest';
import { parseSite } from '../../protocol/site.ts';
import { refusalOf } from '../support/refusal.ts';
import { edited, GOOD } from '../support/site-text.ts';

describe('a mistyped key', () => {
  test.each([
    [
      'resolution: 0.01',
      'resoluton: 0.01',
      '13:5: signals[0].resoluton is not a known key; did you mean "resolution"?',
    ],
    ['time_zone:', 'timezone:', '4:1: timezone is not a known key; did you mean "time_zone"? (and 1 more)'],
    ['signals:', 'sginals:', '8:1: sginals is not a known key; did you mean "signals"? (and 1 more)'],
    ['high_high:', 'highhigh:', '16:14: signals[0].limits.highhigh is not a known key; did you mean "high_high"?'],
    ['plan_topic:', 'plantopic:', '25:5: inputs[0].plantopic is not a known key; did you mean "plan_topic"?'],
    ['time: /ts', 'tiem: /ts', '11:29: signals[0].payload.tiem is not a known key; did you mean "time"?'],
    ['holidays:', 'hollidays:', '27:3: calendar.hollidays is not a known key; did you mean "holidays"?'],
    ['lateness:', 'delay:', '7:1: delay is not a known key; expected one of site, class, time_zone,'],
    [
      '  - name: inflow',
      '  - name: inflow\n    plan_topic: a/b',
      '19:5: signals[1].plan_topic is not a known key; expected one of name, topic,',
    ],
  ])('%s as %s', (from, to, message) => {
    const refusal = refusalOf(() => parseSite(edited(from, to), 'site.yaml'));
    expect(refusal.code).toBe('site-file');
    expect(refusal.message).toContain(`site.yaml:${message}`);
    expect(refusal.details).toMatchObject({ fileName: 'site.yaml', line: Number(message.split(':')[0]) });
  });
});

describe('a wrong value', () => {
  test.each([
    [
      'site: mill-lane',
      'site: mill/lane',
      '2:7: site: expected a name of letters, digits, ".", "-" and "_", at most 64 bytes, got "mill/lane"',
    ],
    ['site: mill-lane', 'site: 7', '2:7: site: expected a name of letters'],
    ['site: mill-lane\n', '', '2:1: site: expected a name'],
    [
      'Europe/Vienna',
      'Europe/Wienna',
      '4:12: time_zone: expected an IANA time zone such as "Europe/Vienna" or "UTC" (did you mean "Europe/Vienna"?), got "Europe/Wienna"',
    ],
    ['Europe/Vienna', '+01:00', '4:12: time_zone: expected an IANA time zone'],
    [
      'tick: 1min',
      'tick: 1m',
      '5:7: tick: expected a duration from 100 ms to one day, such as "10s", "1min" or "1h", got "1m"',
    ],
    ['tick: 1min', 'tick: 60', 'got 60'],
    ['tick: 1min', 'tick: 10ms', 'got "10ms"'],
    ['tick: 1min', 'tick: 2d', 'got "2d"'],
    [
      'tick: 1min',
      'tick:',
      '5:6: tick: expected a duration from 100 ms to one day, such as "10s", "1min" or "1h", got nothing',
    ],
    [
      'horizon: 2h',
      'horizon: 90s',
      '6:10: horizon: expected 1 to 1024 whole ticks of 1min, got 90s, which the tick of 1min does not divide',
    ],
    ['horizon: 2h', 'horizon: 2d', 'horizon: expected 1 to 1024 whole ticks of 1min, got 2880 ticks'],
    [
      'horizon: 2h',
      'horizon: 0',
      '6:10: horizon: expected a whole number of ticks from 1 to 1024, or a duration such as "6h", got 0',
    ],
    ['horizon: 2h', 'horizon: 1.5', 'got 1.5'],
    ['lateness: 5s', 'lateness: 5', '7:11: lateness: expected a duration such as "10s", "1min" or "1h", got 5'],
    ['lateness: 5s', 'root: a/+', '7:7: root: expected topic levels without wildcards'],
    [
      'lateness: 5s',
      'residual_budget: 50kB',
      '7:18: residual_budget: expected a whole number of bytes a day, at least 1024, got "50kB"',
    ],
    [
      'topic: plant/well/level',
      'topic: plant/#/level',
      '10:12: signals[0].topic: topic filter "plant/#/level": # must be the last level',
    ],
    ['topic: plant/well/level', 'topic: $share/a/plant', 'expected a topic filter that every gateway gets in full'],
    ['topic: plant/well/level', 'topic: 5', 'signals[0].topic: expected an MQTT topic filter, got 5'],
    [
      'json: /value',
      'json: value',
      '11:21: signals[0].payload.json: expected a JSON pointer such as "/value" or "" for the whole payload (did you mean "/value"?), got "value"',
    ],
    ['json: /value', 'json: a.b', '(did you mean "/a/b"?)'],
    ['time: /ts', 'time: /~', '11:35: signals[0].payload.time: expected a JSON pointer'],
    [
      '{json: /value, time: /ts}',
      '{time: /ts}',
      '11:14: signals[0].payload: expected one of the keys json, msgpack and sparkplug, got none of them',
    ],
    ['{json: /value, time: /ts}', '{json: /v, msgpack: /v}', 'got json and msgpack'],
    [
      '{json: /value, time: /ts}',
      'text',
      '11:14: signals[0].payload: expected number, {json: "/pointer"}, {msgpack: "/pointer"} or {sparkplug: "metric"}, got "text"',
    ],
    [
      'unit: m\n',
      'unit: °C\n',
      '12:11: signals[0].unit: expected a UCUM unit code in quotes if need be, without spaces (did you mean "Cel"?), got "°C"',
    ],
    ['unit: m\n', 'unit: m / s\n', 'got "m / s"'],
    ['resolution: 0.01', 'resolution: 0', '13:17: signals[0].resolution: expected a number above 0, got 0'],
    ['resolution: 0.01', 'resolution: .nan', 'got NaN'],
    [
      'range: [0, 6]',
      'range: [6, 0]',
      '14:12: signals[0].range: expected two numbers [low, high] with low below high, got [6, 0]',
    ],
    ['range: [0, 6]', 'range: 6', 'got 6'],
    ['range: [0, 6]', 'range: [0, .inf]', 'got [0, Infinity]'],
    [
      'aggregate: last',
      'aggregate: average',
      '15:16: signals[0].aggregate: expected one of last, mean, min, max, sum, increment, got "average"',
    ],
    ['aggregate: last', 'aggregate: lats', '(did you mean "last"?)'],
    ['high: 5,', 'high: 5.6,', '16:25: signals[0].limits.high_high: expected a level above high (5.6), got 5.5'],
    [
      'high_high: 5.5',
      'high_high: 7',
      'signals[0].limits.high_high: expected a level within the range [0, 6], got 7: readings beyond the range are refused',
    ],
    ['low: 0.5', 'low: low', 'signals[0].limits.low: expected a number, got "low"'],
    [
      'column: "Level (m)"',
      'column: 3',
      '17:13: signals[0].column: expected text (in quotes if it looks like a number), got 3',
    ],
    [
      'name: inflow',
      'name: level',
      '18:11: signals[1].name: expected a name of its own, got "level", which is signals[0]',
    ],
    [
      'name: rain',
      'name: level',
      '20:11: inputs[0].name: expected a name of its own, got "level", which is signals[0]',
    ],
    [
      '  - name: inflow',
      '  - name: inflow\n    topic: plant/well/level\n    payload: {json: /value, time: /ts}\n    aggregate: last',
      '19:12: signals[1].topic: expected a reading of its own, got the same topic, payload and aggregate as signals[0] ("level")',
    ],
    [
      '"2026-12-25"',
      '"2026-02-30"',
      '27:14: calendar.holidays[0]: expected a date such as "2026-12-25", got "2026-02-30"',
    ],
    [
      'calendar:',
      'calendar:\n  time_of_day: sometimes',
      '27:16: calendar.time_of_day: expected true or false, got "sometimes"',
    ],
  ])('%s as %s', (from, to, message) => {
    const refusal = refusalOf(() => parseSite(edited(from, to), 'site.yaml'));
    expect(refusal.message).toContain(message);
    expect(refusal.message).toMatch(/^site\.yaml:\d+:\d+: /);
    expect(refusal.message.split('\n')).toHaveLength(1);
  });
});

describe('what is no site file', () => {
  test.each([
    [
      'nothing',
      '',
      '1:1: expected a site file with the keys site, time_zone, tick, horizon and signals, got an empty file',
    ],
    ['comments alone', '# later\n', 'got an empty file'],
    ['a word', 'hello', '1:1: expected a map, got "hello"'],
    ['a list', '- a\n- b', '1:1: expected a map, got ["a", "b"]'],
    ['a table', 'time,level\n2026-01-01,3\n', '1:1: expected a map'],
    ['no signals', GOOD.slice(0, GOOD.indexOf('signals:')), '2:1: signals: expected a list, got nothing'],
    [
      'an empty list of signals',
      `${GOOD.slice(0, GOOD.indexOf('signals:'))}signals: []\n`,
      '8:10: signals: expected at least 1 entries, got []',
    ],
    [
      'signals by name',
      `${GOOD.slice(0, GOOD.indexOf('signals:'))}signals:\n  level: {unit: m}\n`,
      '9:3: signals: expected a list, got a map',
    ],
    ['a tab', edited('  - name: inflow', '\t- name: inflow'), '18:1: expected spaces for indentation, got a tab'],
    [
      'one key twice',
      edited('class: wet-well', 'class: wet-well\nclass: dry-well'),
      '4:1: this key appears twice in the same map; keep one',
    ],
    ['an open bracket', edited('range: [0, 6]', 'range: [0, 6'), 'not valid YAML: '],
    ['two documents', `${GOOD}---\n${GOOD}`, 'expected one YAML document, got several; remove the "---" line'],
    [
      'an unknown tag',
      edited('site: mill-lane', 'site: !secret mill-lane'),
      '2:7: not valid YAML: Unresolved tag: !secret',
    ],
    ['a prototype', `${GOOD}__proto__: {a: 1}\n`, '__proto__ is not a known key'],
    ['far too much', `# ${'x'.repeat(1_048_600)}\n${GOOD}`, 'expected a site file of at most 1048576 bytes'],
  ])('%s', (_, text, message) => {
    const refusal = refusalOf(() => parseSite(text, 'site.yaml'));
    expect(refusal.code).toBe('site-file');
    expect(refusal.message).toContain(message);
    expect(refusal.message.split('\n')).toHaveLength(1);
  });

  test.each([
    [
      'inputs: [{name: pump, topic: a/pump, plan_topic: a/pump}]',
      'inputs[0].plan_topic: expected another topic than that of the readings of "pump", got the same',
    ],
    [
      'inputs: [{name: pump, plan_topic: plans}, {name: rain, plan_topic: plans}]',
      'inputs[1].plan_topic: expected a topic of its own, got that of inputs[0] ("pump")',
    ],
  ])('plan topics that cannot be told apart: %s', (inputs, message) => {
    const text = `site: a\ntime_zone: UTC\ntick: 1min\nhorizon: 2\nsignals: [{name: t}]\n${inputs}\n`;
    expect(refusalOf(() => parseSite(text, 'site.yaml')).message).toContain(message);
  });

  test('aliases that multiply are refused quickly', () => {
    const lines = Array.from(
      { length: 12 },
      (_, i) =>
        `k${i + 1}: &a${i + 1} [${Array(9)
          .fill(i === 0 ? 'x' : `*a${i}`)
          .join(', ')}]`,
    );
    const started = performance.now();
    expect(refusalOf(() => parseSite(lines.join('\n'), 'site.yaml')).message).toContain(
      'site.yaml:1:1: not usable YAML',
    );
    expect(performance.now() - started).toBeLessThan(2000);
  });

  test('too many channels', () => {
    const many = Array.from({ length: 257 }, (_, i) => `  - name: s${i}`).join('\n');
    const text = `${GOOD.slice(0, GOOD.indexOf('signals:'))}signals:\n${many}\n`;
    expect(refusalOf(() => parseSite(text)).message).toContain(
      'signals: expected at most 256 entries, got a list of 257',
    );
  });
});
