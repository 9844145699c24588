/** The bucket that questions and requests for the page are taken from. */
import { expect, test } from 'vitest';
import { TokenBucket } from '../../runtime/token-bucket.ts';

test('a bucket fills with time and never beyond its size', () => {
  const bucket = new TokenBucket({ burst: 2, perSecond: 0.5 }, 0);
  expect([0, 0, 0, 1999, 2000, 2000, 1e9, 1e9, 1e9].map((ms) => bucket.take(ms))).toEqual([
    true,
    true,
    false,
    false,
    true,
    false,
    true,
    true,
    false,
  ]);
});
