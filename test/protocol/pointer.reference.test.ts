/**
 * RFC 6901 (Bryan, Zyp, Nottingham, 2013), section 5 "JSON String Representation": the document and the twelve pointers
 * of its example, checked against a public copy; section 4 for array indices and "-".
 */
import { describe, expect, test } from 'vitest';
import { isPointer, pointerTokens, resolvePointer } from '../../protocol/pointer.ts';
import { refusalOf } from '../support/refusal.ts';

const document: unknown = JSON.parse(
  String.raw`{"foo": ["bar", "baz"], "": 0, "a/b": 1, "c%d": 2, "e^f": 3, "g|h": 4, "i\\j": 5, "k\"l": 6, " ": 7, "m~n": 8}`,
);

describe('RFC 6901', () => {
  test.each<[string, unknown]>([
    ['""', document],
    ['"/foo"', ['bar', 'baz']],
    ['"/foo/0"', 'bar'],
    ['"/"', 0],
    ['"/a~1b"', 1],
    ['"/c%d"', 2],
    ['"/e^f"', 3],
    ['"/g|h"', 4],
    [String.raw`"/i\\j"`, 5],
    [String.raw`"/k\"l"`, 6],
    ['"/ "', 7],
    ['"/m~0n"', 8],
  ])('section 5: %s', (text, value) => {
    const pointer = JSON.parse(text) as string;
    expect(isPointer(pointer)).toBe(true);
    expect(resolvePointer(document, pointer)).toEqual(value);
  });

  test('section 4: ~01 is ~1, not /', () => {
    expect(pointerTokens('/~01')).toEqual(['~1']);
    expect(resolvePointer({ '~1': 5, '/': 6 }, '/~01')).toBe(5);
  });

  test.each([
    ['an index past the end', '/foo/2'],
    ['- names no value', '/foo/-'],
    ['a leading zero', '/foo/00'],
    ['a sign', '/foo/+0'],
    ['a fraction', '/foo/0.0'],
    ['the length of a list', '/foo/length'],
    ['a missing member', '/bar'],
    ['a member of a text', '/foo/0/0'],
    ['a prototype', '/__proto__'],
    ['a method', '/toString'],
    ['a constructor', '/constructor/name'],
  ])('section 4: %s gives nothing', (_, pointer) => expect(resolvePointer(document, pointer)).toBeUndefined());

  test.each([['foo'], ['#/foo'], ['/~'], ['/a~2b'], ['/a~']])('section 3: %s is no pointer', (pointer) => {
    expect(isPointer(pointer)).toBe(false);
    expect(refusalOf(() => resolvePointer(document, pointer)).message).toContain('expected a JSON pointer');
  });
});
