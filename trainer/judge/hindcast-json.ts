/**
 * A hindcast for other programs: by signal and step, beside every rival; and in the signals standardised by the learning
 * part, so that it can be held against published tables.
 */
import type { Hindcast } from './hindcast.ts';
import { meanOf, skillScore } from './scores.ts';

/** Plain JSON value of a number; null where there was nothing to count. */
type Figure = number | null;

/**
 * The hindcast as a plain object.
 *
 * shapes  `signals[i].horizons[h - 1]`; `average` over signals, and over steps where it says so
 * units   as the keys say; mse, mae, bias and width in the signal's unit
 * throws  nothing
 * source  none
 * cost    trivial
 */
export function hindcastJson(hindcast: Hindcast): Record<string, unknown> {
  return {
    horizon: hindcast.horizon,
    tick_s: hindcast.tickMs / 1000,
    from: new Date(hindcast.fromMs).toISOString(),
    to: new Date(hindcast.toMs).toISOString(),
    origins: hindcast.origins,
    rivals: hindcast.rivals,
    nominal_coverage: hindcast.nominalCoverage,
    average: average(hindcast),
    signals: hindcast.signals.map((signal, i) => ({
      signal,
      unit: hindcast.units[i],
      horizons: Array.from({ length: hindcast.horizon }, (_, k) => cellJson(hindcast, i * hindcast.horizon + k, k + 1)),
    })),
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
