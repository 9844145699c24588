import { describe, expect, it } from 'vitest';
import { fourier } from '../../../trainer/linalg/fourier.ts';

describe('fourier', () => {
  it('agrees with the defining sum', () => {
    const n = 32;
    const re = Float64Array.from({ length: n }, (_, t) => Math.sin(1.3 * t) + 0.2 * t);
    const im = Float64Array.from({ length: n }, (_, t) => Math.cos(0.7 * t * t));
    const gotRe = re.slice();
    const gotIm = im.slice();
    fourier(gotRe, gotIm);
    for (let k = 0; k < n; k++) {
      let sumRe = 0;
      let sumIm = 0;
      for (let t = 0; t < n; t++) {
        const angle = (-2 * Math.PI * k * t) / n;
        sumRe += re[t]! * Math.cos(angle) - im[t]! * Math.sin(angle);
        sumIm += re[t]! * Math.sin(angle) + im[t]! * Math.cos(angle);
      }
      // Sums of 32 numbers up to 7.
      expect(Math.abs(gotRe[k]! - sumRe)).toBeLessThan(1e-12);
      expect(Math.abs(gotIm[k]! - sumIm)).toBeLessThan(1e-12);
    }
  });

  it('refuses a length that is no power of two', () => {
    expect(() => fourier(new Float64Array(12), new Float64Array(12))).toThrow(RangeError);
  });
});
