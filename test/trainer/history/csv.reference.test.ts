/** CSV against the examples of RFC 4180 (2005), section 2, rules 1 to 7. */
import { describe, expect, it } from 'vitest';
import { RecordScanner } from '../../../trainer/history/records.ts';

function records(text: string, separator = ',', cut = text.length): string[][] {
  const found: string[][] = [];
  const scanner = new RecordScanner('x.csv', separator, 1, (record) =>
    found.push(Array.from({ length: record.count }, (_, i) => record.text(i))),
  );
  const bytes = Buffer.from(text);
  for (let at = 0; at < bytes.length; at += cut) scanner.push(bytes.subarray(at, at + cut));
  scanner.end();
  return found;
}

describe('RFC 4180 section 2', () => {
  const two = [
    ['aaa', 'bbb', 'ccc'],
    ['zzz', 'yyy', 'xxx'],
  ];
  it('rule 1 and 2: CRLF, the last one optional', () => {
    expect(records('aaa,bbb,ccc\r\nzzz,yyy,xxx\r\n')).toEqual(two);
    expect(records('aaa,bbb,ccc\r\nzzz,yyy,xxx')).toEqual(two);
  });
  it('rule 5: quoted fields', () => expect(records('"aaa","bbb","ccc"\r\nzzz,yyy,xxx')).toEqual(two));
  it('rule 6: line breaks and commas inside quotes', () => {
    expect(records('"aaa","b\r\nbb","ccc"\r\nzzz,yyy,xxx')).toEqual([['aaa', 'b\r\nbb', 'ccc'], two[1]]);
    expect(records('"a,aa",b\n')).toEqual([['a,aa', 'b']]);
  });
  it('rule 7: doubled quotes', () => expect(records('"aaa","b""bb","ccc"')).toEqual([['aaa', 'b"bb', 'ccc']]));
  it('gives the same records however the bytes are cut after line breaks', () => {
    const text = 'a,"x\ny",b\n1,"2\n\n3",4\n';
    const whole = records(text);
    const found: string[][] = [];
    const scanner = new RecordScanner('x.csv', ',', 1, (record) =>
      found.push(Array.from({ length: record.count }, (_, i) => record.text(i))),
    );
    for (const line of text.split(/(?<=\n)/)) scanner.push(Buffer.from(line));
    scanner.end();
    expect(found).toEqual(whole);
    expect(found).toEqual([
      ['a', 'x\ny', 'b'],
      ['1', '2\n\n3', '4'],
    ]);
  });
});
