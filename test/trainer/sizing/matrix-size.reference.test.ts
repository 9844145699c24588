/**
 * Worked by hand.
 *
 * One hour of a thermal camera at 25 frames a second: 3600 s × 25 = 90,000 frames. A window at each frame makes 90,000 windows;
 * their Gram matrix has 90,000² = 8.1 × 10⁹ entries, at 8 bytes 64.8 × 10⁹ bytes, 65 GB.
 *
 * With windows of two seconds (50 frames), the first whole one ends at the 50th frame: 90,000 − 49 = 89,951 windows. A camera of
 * 320 × 240 = 76,800 points gives 50 × 76,800 = 3,840,000 numbers a window; their covariance has 3.84² × 10¹² = 14.7456 × 10¹²
 * entries, 118 TB.
 */
import { expect, it } from 'vitest';
import { framesSize } from '../../../trainer/sizing/frames-size.ts';
import { framesText, sizeText } from '../../../trainer/sizing/size-text.ts';

it('an hour of a thermal camera, a window at each frame', () => {
  const { windows, gram } = framesSize(3600 * 25, 320 * 240, 1);
  expect(windows).toBe(90_000);
  expect(gram).toEqual({ rows: 90_000, entries: 8_100_000_000, bytes: 64_800_000_000 });
  expect(sizeText(gram.bytes)).toBe('64.8 GB');
});

it('the same in windows of two seconds', () => {
  const size = framesSize(90_000, 76_800, 50);
  expect(size).toMatchObject({ windows: 89_951, features: 3_840_000, windowBytes: 15_360_000 });
  expect(size.covariance).toEqual({ rows: 3_840_000, entries: 14_745_600_000_000, bytes: 117_964_800_000_000 });
  const said = framesText(size, { numbers: 256, horizon: 16, rank: 32, peakBytes: 3e8 }, 24e9);
  expect(said).toContain('89,951 windows of 3,840,000 numbers');
  expect(said).toContain('64.7 GB, and 24.0 GB are free; neither is formed');
  expect(said).toContain('3,840,000 x 3,840,000: 1.47e+13 entries, 118 TB');
});

it.each([
  [0, '0 B'],
  [999, '999 B'],
  [1000, '1.00 kB'],
  [999_499, '999 kB'],
  [999_500, '1.00 MB'],
  [12_345_678, '12.3 MB'],
  [6.48e10, '64.8 GB'],
  [8e12, '8.00 TB'],
  [1e24, '1000000 EB'],
])('%d bytes are %s', (bytes, text) => {
  expect(sizeText(bytes)).toBe(text);
});
