/**
 * Checksums, hash and code lengths against published values.
 *
 * - CRC-32: check value of "123456789", cbf43926 (the polynomial of ITU-T V.42, 8.1.1.6.2; check value as catalogues of
 *   CRC algorithms give it).
 * - SHA-256: FIPS 180-4, example "abc" (NIST, Examples with Intermediate Values).
 * - Code length: no code beats the entropy, and a good one comes near it: C. E. Shannon, A Mathematical Theory of
 *   Communication, Bell System Technical Journal 27 (1948), theorem 9; entropy of a two-way choice, section 6.
 * - Student's t with 6 degrees of freedom: upper points as statistical tables print them (from memory: 1.440, 1.943,
 *   2.447, 3.143, 3.707, 5.959 for 0.1, 0.05, 0.025, 0.01, 0.005, 0.0005).
 */
import { crc32 } from 'node:zlib';
import { describe, expect, it } from 'vitest';
import { BitDecoder, BitEncoder, ONE } from '../../../protocol/segment/coder.ts';
import { SegmentWriter, segmentHash } from '../../../protocol/segment/index.ts';
import { upperTail } from '../../../protocol/segment/student.ts';
import { opening } from './opening.ts';

/** Numerical Recipes' linear congruential generator, the high bits: enough for a source, and the same everywhere. */
function uniform(seed: number): () => number {
  let state = seed;
  return () => {
    state = (Math.imul(state, 1_664_525) + 1_013_904_223) >>> 0;
    return ((state >>> 8) + 0.5) / 2 ** 24;
  };
}

describe('checksum and hash', () => {
  it('are CRC-32 and SHA-256', () => {
    const text = new TextEncoder();
    expect(crc32(text.encode('123456789')).toString(16)).toBe('cbf43926');
    expect(Buffer.from(segmentHash(text.encode('abc'))).toString('hex')).toBe(
      'ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad',
    );
  });

  it('close a segment: the last four bytes are the CRC-32 of the rest', () => {
    const bytes = new SegmentWriter(opening(1)).finish(new Uint8Array(0));
    const body = bytes.subarray(0, -4);
    expect(Buffer.from(bytes.subarray(-4)).readUInt32BE()).toBe(crc32(body));
  });
});

describe('the range coder', () => {
  it('costs no more than the entropy of its decisions plus the few bytes of its end', () => {
    for (const p of [0.5, 0.2, 0.01, 1 / ONE]) {
      const next = uniform(3);
      const encoder = new BitEncoder();
      const p1 = Math.max(1, Math.round(p * ONE));
      const bits = Array.from({ length: 40_000 }, () => (next() < p ? 1 : 0));
      let ideal = 0;
      for (const bit of bits) {
        encoder.code(bit, p1);
        ideal -= Math.log2(bit === 1 ? p1 / ONE : 1 - p1 / ONE);
      }
      const bytes = encoder.finish();
      // 0.02 %: rounding of the interval to 24 bits or more; 4 bytes: what tells the last interval.
      expect(8 * bytes.length).toBeLessThan(ideal * 1.0002 + 32);
      expect(8 * bytes.length).toBeGreaterThan(ideal - 1);
      const decoder = new BitDecoder(bytes, 'payload');
      expect(bits.every((bit) => decoder.code(0, p1) === bit)).toBe(true);
      decoder.finish();
    }
  });

  it('carries through a long run of full bytes', () => {
    const encoder = new BitEncoder();
    const decisions: [number, number][] = [];
    for (let i = 0; i < 3000; i++) decisions.push([i % 97 === 96 ? 1 : 0, i % 2 === 0 ? 1 : ONE - 1]);
    for (const [bit, p1] of decisions) encoder.code(bit, p1);
    const decoder = new BitDecoder(encoder.finish(), 'payload');
    expect(decisions.every(([bit, p1]) => decoder.code(0, p1) === bit)).toBe(true);
  });
});

/** Bits a reading of a segment fed by `draw`, which gives an index and its ideal cost in bits. */
function costAgainstIdeal(draw: () => readonly [number, number], scale: number, forecast: number) {
  const channels = 4;
  const ticks = 4000;
  const residualScaleSteps = new Float64Array(channels).fill(scale);
  const writer = new SegmentWriter(opening(channels, { residualScaleSteps }));
  const predicted = new Float64Array(channels).fill(forecast);
  const row = new Float64Array(channels);
  let ideal = 0;
  for (let t = 0; t < ticks; t++) {
    for (let c = 0; c < channels; c++) {
      const [index, bits] = draw();
      row[c] = index;
      ideal += bits;
    }
    writer.push(row, predicted);
  }
  return { spent: 8 * writer.bytesSoFar, ideal, readings: channels * ticks };
}

describe('the adaptive models, on sources whose entropy is known', () => {
  // P(k) = (1 - r) / (1 + r) × r^|k|: two geometric sides.
  it.each([0.5, 0.9, 0.98])('cost at most 2 %% more than a two-sided geometric source of ratio %f', (ratio) => {
    const next = uniform(11);
    const zero = (1 - ratio) / (1 + ratio);
    const { spent, ideal } = costAgainstIdeal(
      () => {
        const size = next() < zero ? 0 : 1 + Math.floor(Math.log(next()) / Math.log(ratio));
        const index = next() < 0.5 ? -size : size;
        return [index, -Math.log2(zero * ratio ** size)];
      },
      1 / (1 - ratio),
      0,
    );
    expect(spent / ideal).toBeLessThan(1.02);
    expect(spent / ideal).toBeGreaterThan(0.99);
  });

  it('cost at most 2 % more than eight equal levels', () => {
    const next = uniform(12);
    const { spent, ideal } = costAgainstIdeal(() => [Math.floor(8 * next()), 3], 3, 3.5);
    expect(spent / ideal).toBeLessThan(1.02);
  });

  it('cost at most 0.02 bit more than a rare two-way choice', () => {
    for (const p of [0.3, 0.1, 0.02]) {
      const next = uniform(13);
      const { spent, ideal, readings } = costAgainstIdeal(
        () => (next() < p ? [1, -Math.log2(p)] : [0, -Math.log2(1 - p)]),
        0.3,
        p,
      );
      expect((spent - ideal) / readings).toBeLessThan(0.02);
    }
  });

  it('cost nothing to speak of where nothing happens', () => {
    const { spent, readings } = costAgainstIdeal(() => [450, 0], 1, 450);
    expect(spent / readings).toBeLessThan(0.01);
  });
});

describe('the error shape', () => {
  it("is Student's t with 6 degrees of freedom, in both tails", () => {
    for (const [x, p] of [
      [1.44, 0.1],
      [1.943, 0.05],
      [2.447, 0.025],
      [3.143, 0.01],
      [3.707, 0.005],
      [5.959, 0.0005],
    ] as const) {
      // Tables give x to 3 decimals, so p is known to about 0.1 %.
      expect(Math.abs(upperTail(x) / p - 1)).toBeLessThan(2e-3);
      expect(upperTail(-x)).toBe(1 - upperTail(x));
    }
    expect(upperTail(0)).toBe(0.5);
    // Far out the tail is c x^-6 with c = 6^3 × 20 / (16 × 8): see the factored form.
    expect(upperTail(1e8) * 1e48).toBeCloseTo((216 * 20) / 128, 6);
  });
});
