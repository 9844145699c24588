/** Which stretches are worst, and skill by stretch, by hand-made losses. */
import { describe, expect, it } from 'vitest';
import { skillByBlock } from '../../../trainer/judge/blocks.ts';
import type { Hindcast } from '../../../trainer/judge/hindcast.ts';
import { spellName, worstSpells } from '../../../trainer/judge/worst-days.ts';

const HOUR_MS = 3_600_000;
const FIRST_MS = Date.UTC(2025, 2, 1);

function cast(hours: number, losses: (signal: number, hour: number) => number): Hindcast {
  const originMs = Float64Array.from({ length: hours }, (_, k) => FIRST_MS + k * HOUR_MS);
  const of = (signal: number): Float64Array => originMs.map((_, k) => losses(signal, k));
  return {
    signals: ['level', 'flow'],
    horizon: 4,
    tickMs: HOUR_MS,
    origins: hours,
    lossEvery: 1,
    originMs,
    fromMs: FIRST_MS,
    toMs: FIRST_MS + (hours + 4) * HOUR_MS,
    rivals: ['persistence'],
    scale: Float64Array.of(1, 10),
    pathLoss: [of(0), of(1)],
    rivalPathLoss: [0, 1].map(() => new Float64Array(hours).fill(2)),
  } as unknown as Hindcast;
}

describe('worstSpells', () => {
  it('names days, worst first, by signal and over all', () => {
    const ten = cast(240, (signal, hour) => {
      const day = Math.floor(hour / 24);
      return signal === 0 ? (day === 3 ? 5 : 1) : day === 7 ? 900 : 100;
    });
    const { spellMs, overall, bySignal } = worstSpells(ten, 2);
    expect(spellMs).toBe(24 * HOUR_MS);
    expect(bySignal.map((spells) => spellName(spells[0]!.fromMs, spellMs))).toEqual(['2025-03-04', '2025-03-08']);
    expect(bySignal[0]![0]!.timesUsual).toBeCloseTo(5 / 1.4, 12);
    // Standardised: the level's day is 5 + 1 over two, the flow's 1 + 9 over two.
    expect(overall.map((spell) => [spellName(spell.fromMs, spellMs), spell.mseStandardised])).toEqual([
      ['2025-03-08', 5],
      ['2025-03-04', 3],
    ]);
    expect(overall[0]!.origins).toBe(24);
  });

  it('takes shorter stretches of a short time, and passes over what was not read', () => {
    const { spellMs, bySignal } = worstSpells(
      cast(30, (signal, hour) => (signal === 1 ? Number.NaN : hour)),
      1,
    );
    expect(spellMs).toBe(6 * HOUR_MS);
    expect(spellName(bySignal[0]![0]!.fromMs, spellMs)).toBe('2025-03-02 00:00 UTC');
    expect(bySignal[1]).toEqual([]);
  });
});

describe('skillByBlock', () => {
  it('gives eight stretches of equal length, in order', () => {
    const blocks = skillByBlock(
      cast(240, (_, hour) => (hour < 120 ? 1 : 3)),
      0,
      0,
    );
    expect(blocks.map((block) => block.skill)).toEqual([0.5, 0.5, 0.5, 0.5, -0.5, -0.5, -0.5, -0.5]);
    expect(blocks[0]!.fromMs).toBe(FIRST_MS);
    expect(blocks.every((block, k) => k === 0 || block.fromMs === blocks[k - 1]!.toMs)).toBe(true);
  });

  it('gives as many where only every fourth origin was kept', () => {
    const few = { ...cast(240, () => 1), lossEvery: 4 };
    expect(skillByBlock(few, 0, 0)).toHaveLength(8);
    expect(skillByBlock({ ...cast(8, () => 1), lossEvery: 4 }, 0, 0)).toHaveLength(4);
  });

  it('gives fewer where a stretch would be shorter than two horizons', () => {
    expect(
      skillByBlock(
        cast(20, () => 1),
        1,
        0,
      ),
    ).toHaveLength(2);
    expect(
      skillByBlock(
        cast(5, () => 1),
        1,
        0,
      ),
    ).toHaveLength(1);
  });
});
