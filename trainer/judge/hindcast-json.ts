/**
 * A hindcast for other programs: by signal and step, beside every rival; and in the signals standardised by the learning
 * part, so that it can be held against published tables.
 */
import { judge, type Verdict } from './gate.ts';
import type { Hindcast } from './hindcast.ts';
import type { Reliability } from './reliability.ts';
import { meanOf, skillScore } from './scores.ts';
import { type Spell, worstSpells } from './worst-days.ts';

/** Worst stretches listed, of all signals together and of each. */
const WORST = 5;

/** Plain JSON value of a number; null where there was nothing to count. */
type Figure = number | null;

/**
 * The hindcast as a plain object.
 *
 * shapes  `signals[i].horizons[h - 1]`; `average` over signals, and over steps where it says so
 * units   as the keys say; mse, mae, bias and width in the signal's unit
 * throws  nothing
 * source  none
 * cost    one judging
 */
export function hindcastJson(hindcast: Hindcast): Record<string, unknown> {
  const verdicts = judge(hindcast);
  const worst = worstSpells(hindcast, WORST);
  return {
    horizon: hindcast.horizon,
    tick_s: hindcast.tickMs / 1000,
    from: new Date(hindcast.fromMs).toISOString(),
    to: new Date(hindcast.toMs).toISOString(),
    origins: hindcast.origins,
    rivals: hindcast.rivals,
    nominal_coverage: hindcast.nominalCoverage,
    sentence: verdicts.sentence,
    mean_skill: figure(verdicts.meanSkill),
    average: average(hindcast),
    worst_spells: { length_s: worst.spellMs / 1000, all_signals: worst.overall.map(spellJson) },
    crossings: hindcast.reliability === null ? null : crossingsJson(hindcast.reliability, hindcast.tickMs),
    signals: hindcast.signals.map((signal, i) => ({
      signal,
      unit: hindcast.units[i],
      verdict: verdictJson(verdicts.signals[i]),
      worst_spells: worst.bySignal[i].map(spellJson),
      horizons: Array.from({ length: hindcast.horizon }, (_, k) => cellJson(hindcast, i * hindcast.horizon + k, k + 1)),
    })),
  };
}

function verdictJson({ skill, bestRival, sentence, test, blocks }: Verdict): Record<string, unknown> {
  return {
    sentence,
    skill: figure(skill),
    against: bestRival,
    test:
      test === null
        ? null
        : {
            method: 'Diebold-Mariano, corrected by Harvey, Leybourne and Newbold',
            variance: test.variance,
            origins: test.origins,
            statistic: figure(test.statistic),
            p_better: figure(test.pBetter),
            p_worse: figure(test.pWorse),
          },
    stretches: blocks.map((block) => ({
      from: new Date(block.fromMs).toISOString(),
      to: new Date(block.toMs).toISOString(),
      skill: figure(block.skill),
    })),
  };
}

function spellJson(spell: Spell): Record<string, unknown> {
  return {
    from: new Date(spell.fromMs).toISOString(),
    mse_standardised: figure(spell.mseStandardised),
    times_usual: figure(spell.timesUsual),
    origins: spell.origins,
  };
}

function crossingsJson(reliability: Reliability, tickMs: number): Record<string, unknown> {
  const { isDeclared, limits, count, crossed, brier, brierOfShare, meanGap, timed, stepBias, stepError } = reliability;
  return {
    limits,
    declared: isDeclared,
    asked: count,
    crossed: figure(crossed),
    brier: figure(brier),
    brier_of_share: figure(brierOfShare),
    mean_gap: figure(meanGap),
    bins: reliability.bins.map(({ said, observed, count: asked }) => ({ said, observed, asked })),
    timed,
    time_bias_s: figure((stepBias * tickMs) / 1000),
    time_error_s: figure((stepError * tickMs) / 1000),
  };
}

function cellJson(hindcast: Hindcast, cell: number, step: number): Record<string, unknown> {
  const cells = hindcast.mse.length;
  return {
    step,
    count: hindcast.count[cell],
    mse: figure(hindcast.mse[cell]),
    mae: figure(hindcast.mae[cell]),
    bias: figure(hindcast.bias[cell]),
    mse_standardised: figure(hindcast.mseStandardised[cell]),
    mae_standardised: figure(hindcast.maeStandardised[cell]),
    coverage: figure(hindcast.coverage[cell]),
    width: figure(hindcast.width[cell]),
    rivals: Object.fromEntries(
      hindcast.rivals.map((name, r) => [
        name,
        {
          mse: figure(hindcast.rivalMse[r * cells + cell]),
          mae: figure(hindcast.rivalMae[r * cells + cell]),
          skill: figure(skillScore(hindcast.mse[cell], hindcast.rivalMse[r * cells + cell])),
        },
      ]),
    ),
  };
}

function average(hindcast: Hindcast): Record<string, unknown> {
  const { horizon: H } = hindcast;
  const cells = hindcast.mse.length;
  const ny = hindcast.signals.length;
  const acrossSignals = (values: Float64Array, h: number): number =>
    meanOf(Float64Array.from({ length: ny }, (_, i) => values[i * H + h]));
  const rivalStandardised = hindcast.rivals.map((_, r) => {
    const mse = hindcast.rivalMse.subarray(r * cells, (r + 1) * cells);
    return mse.map((value, cell) => value / hindcast.scale[Math.floor(cell / H)] ** 2);
  });
  return {
    mse_standardised: figure(meanOf(hindcast.mseStandardised)),
    mae_standardised: figure(meanOf(hindcast.maeStandardised)),
    coverage: figure(meanOf(hindcast.coverage)),
    rivals: Object.fromEntries(
      hindcast.rivals.map((name, r) => [
        name,
        {
          mse_standardised: figure(meanOf(rivalStandardised[r])),
          skill: figure(skillScore(meanOf(hindcast.mseStandardised), meanOf(rivalStandardised[r]))),
        },
      ]),
    ),
    by_step: Array.from({ length: H }, (_, h) => ({
      step: h + 1,
      mse_standardised: figure(acrossSignals(hindcast.mseStandardised, h)),
      mae_standardised: figure(acrossSignals(hindcast.maeStandardised, h)),
      coverage: figure(acrossSignals(hindcast.coverage, h)),
    })),
  };
}

function figure(value: number): Figure {
  return Number.isFinite(value) ? value : null;
}
