/**
 * OASIS MQTT Version 3.1.1 (29 October 2014) and Version 5.0 (7 March 2019), section 4.7 "Topic Names and Topic
 * Filters", non-normative comments of 4.7.1.2, 4.7.1.3, 4.7.2 and 4.7.3, the same in both versions; shared
 * subscriptions from Version 5.0 section 4.8.2. The examples are from memory of those sections.
 */
import { describe, expect, test } from 'vitest';
import { checkTopicFilter, checkTopicName, matchesFilter } from '../../protocol/topics.ts';
import { refusalOf } from '../support/refusal.ts';

describe('4.7.1.2 multi-level wildcard', () => {
  test.each([
    ['sport/tennis/player1/#', 'sport/tennis/player1', true],
    ['sport/tennis/player1/#', 'sport/tennis/player1/ranking', true],
    ['sport/tennis/player1/#', 'sport/tennis/player1/score/wimbledon', true],
    ['sport/tennis/player1/#', 'sport/tennis/player2', false],
    // "sport/#" also matches the singular "sport", since # includes the parent level.
    ['sport/#', 'sport', true],
    ['#', 'sport/tennis', true],
    ['#', '/', true],
  ])('%s and %s: %s', (filter, topic, matches) => expect(matchesFilter(filter, topic)).toBe(matches));

  test.each([['#'], ['sport/tennis/#']])('%s is valid', (filter) =>
    expect(() => checkTopicFilter(filter)).not.toThrow(),
  );
  test.each([['sport/tennis#'], ['sport/tennis/#/ranking']])('%s is not valid', (filter) => {
    expect(refusalOf(() => checkTopicFilter(filter)).code).toBe('topic');
  });
});

describe('4.7.1.3 single-level wildcard', () => {
  test.each([
    ['sport/tennis/+', 'sport/tennis/player1', true],
    ['sport/tennis/+', 'sport/tennis/player2', true],
    ['sport/tennis/+', 'sport/tennis/player1/ranking', false],
    ['sport/+', 'sport', false],
    ['sport/+', 'sport/', true],
    ['+/+', '/finance', true],
    ['/+', '/finance', true],
    ['+', '/finance', false],
  ])('%s and %s: %s', (filter, topic, matches) => expect(matchesFilter(filter, topic)).toBe(matches));

  test.each([['+'], ['+/tennis/#'], ['sport/+/player1']])('%s is valid', (filter) =>
    expect(() => checkTopicFilter(filter)).not.toThrow(),
  );
  test('sport+ is not valid', () => expect(refusalOf(() => checkTopicFilter('sport+')).code).toBe('topic'));
});

describe('4.7.2 topics beginning with $', () => {
  test.each([
    ['#', '$SYS/monitor/Clients', false],
    ['+/monitor/Clients', '$SYS/monitor/Clients', false],
    ['$SYS/#', '$SYS/monitor/Clients', true],
    ['$SYS/monitor/+', '$SYS/monitor/Clients', true],
  ])('%s and %s: %s', (filter, topic, matches) => expect(matchesFilter(filter, topic)).toBe(matches));
});

describe('4.7.3 semantics and usage', () => {
  test.each([
    ['names are case sensitive', 'ACCOUNTS', 'Accounts', false],
    ['spaces are allowed', 'Accounts payable', 'Accounts payable', true],
    ['a leading / makes another name', '/finance', 'finance', false],
    ['a trailing / makes another name', 'finance/', 'finance', false],
    ['only a / is a name', '/', '/', true],
  ])('%s', (_, filter, topic, matches) => {
    expect(() => checkTopicName(topic)).not.toThrow();
    expect(matchesFilter(filter, topic)).toBe(matches);
  });

  test.each([
    ['an empty one [MQTT-4.7.3-1]', ''],
    ['the null character [MQTT-4.7.3-2]', 'a\0b'],
    ['more than 65535 bytes [MQTT-4.7.3-3]', 'ä'.repeat(32_768)],
    ['half a surrogate pair [MQTT-1.5.4-1]', 'a\udc00'],
  ])('%s is refused as name and as filter', (_, text) => {
    expect(refusalOf(() => checkTopicName(text)).code).toBe('topic');
    expect(refusalOf(() => checkTopicFilter(text)).code).toBe('topic');
  });

  test('65535 bytes are allowed', () => expect(() => checkTopicName('a'.repeat(65_535))).not.toThrow());
  test.each([['a/+'], ['a/#'], ['a+b']])('a name has no wildcards: %s [MQTT-3.3.2-2]', (name) =>
    expect(refusalOf(() => checkTopicName(name)).message).toContain('for filters only'),
  );
});

describe('4.8.2 shared subscriptions', () => {
  test.each([['$share/consumer1/sport/tennis/+'], ['$share/consumer1//finance']])('%s is valid', (filter) =>
    expect(() => checkTopicFilter(filter)).not.toThrow(),
  );
  test.each([
    ['$share'],
    ['$share/consumer1'],
    ['$share/consumer1/'],
    ['$share//finance'],
    ['$share/a+/finance'],
    ['$share/a/b#'],
  ])('%s is not valid', (filter) => expect(refusalOf(() => checkTopicFilter(filter)).code).toBe('topic'));
  test('it matches as the filter inside it', () => {
    expect(matchesFilter('$share/desk/stillwell/+/segments', 'stillwell/mill-lane/segments')).toBe(true);
    expect(matchesFilter('$share/consumer1//finance', '/finance')).toBe(true);
    expect(matchesFilter('$share/consumer1/#', '$SYS/monitor')).toBe(false);
  });
});
