import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { checkTopicName, coversFilter, matchesFilter, parseTopic, topicsOf } from '../../protocol/topics.ts';

describe('topics of a site', () => {
  test('every topic is built, is a valid name, and is taken apart again', () => {
    const topics = topicsOf('plant/forecasts', 'mill-lane');
    const kinds = ['state', 'forecastAll', 'health', 'segments', 'receipts', 'bundle', 'orders', 'questions'] as const;
    for (const kind of kinds) {
      expect(() => checkTopicName(topics[kind])).not.toThrow();
      expect(parseTopic('plant/forecasts', topics[kind])).toEqual({ site: 'mill-lane', kind, signal: null });
    }
    expect(topics.forecast('flow')).toBe('plant/forecasts/mill-lane/forecast/flow');
    expect(parseTopic('plant/forecasts', topics.forecast('flow'))).toEqual({
      site: 'mill-lane',
      kind: 'forecast',
      signal: 'flow',
    });
    expect(parseTopic('plant/forecasts', topics.warning('flow'))).toEqual({
      site: 'mill-lane',
      kind: 'warning',
      signal: 'flow',
    });
    expect(parseTopic('plant/forecasts', topics.answers('hmi-3'))).toMatchObject({ kind: 'answers', signal: 'hmi-3' });
    expect(topics.forecastAll).toBe('plant/forecasts/mill-lane/forecasts');
    expect(new Set(kinds.map((kind) => topics[kind])).size).toBe(kinds.length);
  });

  test.each([
    ['another root', 'other/mill-lane/state'],
    ['no site', 'stillwell//state'],
    ['no kind', 'stillwell/mill-lane'],
    ['an unknown kind', 'stillwell/mill-lane/weather'],
    ['a level too many', 'stillwell/mill-lane/state/x'],
    ['a forecast of nothing', 'stillwell/mill-lane/forecast'],
    ['a forecast of an empty name', 'stillwell/mill-lane/forecast/'],
    ['a forecast with a level too many', 'stillwell/mill-lane/forecast/flow/x'],
    ['a root that only begins alike', 'stillwellx/mill-lane/state'],
    ['an answer two levels down', 'stillwell/mill-lane/answers/a/b'],
    ['a kind named like a method', 'stillwell/mill-lane/toString'],
  ])('%s is not one of ours', (_, topic) => expect(parseTopic('stillwell', topic)).toBeNull());

  test('a wildcard for the site makes the filter for all sites', () => {
    expect(matchesFilter(topicsOf('stillwell', '+').segments, 'stillwell/mill-lane/segments')).toBe(true);
    expect(matchesFilter(topicsOf('stillwell', '+').segments, 'stillwell/mill-lane/state')).toBe(false);
    expect(matchesFilter(topicsOf('stillwell', 'a').forecast('+'), 'stillwell/a/forecast/flow')).toBe(true);
  });

  test('a filter covers another where every topic under that one is under it', () => {
    const levels = ['a', 'b', '+', '$s'];
    const names = ['a', 'b', '', '$s'];
    const product = (parts: readonly string[], depth: number): string[] =>
      depth === 0
        ? []
        : [...parts, ...parts.flatMap((one) => product(parts, depth - 1).map((rest) => `${one}/${rest}`))];
    const filters = [...product(levels, 2), ...product(levels, 2).map((one) => `${one}/#`), '#'];
    const topics = product(names, 3);
    let covered = 0;
    for (const wide of filters)
      for (const narrow of filters) {
        const isCovered = topics.every((topic) => !matchesFilter(narrow, topic) || matchesFilter(wide, topic));
        if (isCovered) covered++;
        expect([wide, narrow, coversFilter(wide, narrow)]).toEqual([wide, narrow, isCovered]);
      }
    expect(covered).toBeGreaterThan(filters.length * 2);
  });

  test('matching agrees with a slow oracle that expands the filter into a regular expression', () => {
    const level = fc.constantFrom('a', 'b', '', '+', '$s');
    const filter = fc.tuple(fc.array(level, { minLength: 1, maxLength: 4 }), fc.boolean());
    const topic = fc.array(fc.constantFrom('a', 'b', '', '$s'), { minLength: 1, maxLength: 5 });
    let matched = 0;
    fc.assert(
      fc.property(filter, topic, ([levels, isOpen], names) => {
        const text = [...levels, ...(isOpen ? ['#'] : [])].join('/');
        const parts = levels.map((one) => (one === '+' ? '[^/]*' : one.replace('$', '\\$')));
        const pattern = new RegExp(`^${parts.join('/')}${isOpen ? '(/.*)?' : ''}$`);
        const name = names.join('/');
        const isHidden = name.startsWith('$') && levels[0] === '+';
        const expected = pattern.test(name) && !isHidden;
        if (expected) matched++;
        expect(matchesFilter(text, name)).toBe(expected);
      }),
      { seed: 20260306, numRuns: 3000 },
    );
    expect(matched).toBeGreaterThan(100);
  });
});
