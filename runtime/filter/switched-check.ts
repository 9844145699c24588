/** What a switched section must be before anything is computed with it. */
import type { BankModel } from './model.ts';
import { requireEach, requireField, requireLength, requireWeights, requireWhole } from './requirement.ts';
import { summaryLength } from './switched-correction.ts';
import type { SwitchedSection } from './switched-section.ts';

/** Largest weight of a section: products of a few of them and clipped values stay far below the float64 range. */
const SECTION_LIMIT = 1e9;
/** The spectral radius proved by powers: below it by this much, since powers of a rounded matrix are not exact. */
const GROWTH_LIMIT = 4;
const SQUARINGS = 14;

/**
 * Refuses a section whose parts disagree, that could leave the finite numbers, or a mode of which grows without end.
 *
 * shapes  as SwitchedSection
 * throws  FilterError 'model' naming the part
 */
export function checkSwitched(model: BankModel, section: SwitchedSection): void {
  const { modeCount: M, discrete, driven, inputs, decays, pairFrom, pairTo, correction, forecast } = section;
  const n = driven.length;
  const k = discrete.length;
  const P = pairFrom.length;
  const F = n * decays.length + inputs.length * (decays.length + 1);
  requireWhole(M, 'switched.modeCount', 2, 64);
  requireChannels(driven, 'switched.driven', 0, model.signalCount, 1);
  requireChannels(discrete, 'switched.discrete', 0, model.signalCount, 1);
  requireChannels(inputs, 'switched.inputs', model.signalCount, model.channelCount, 0);
  requireChannels(forecast, 'switched.forecast', 0, model.signalCount, 1);
  for (const channel of forecast) {
    const isOurs = driven.includes(channel) !== discrete.includes(channel);
    requireField(isOurs, 'switched.forecast', 'a driven or a near-discrete signal', channel);
  }
  requireWhole(section.dwellLimit, 'switched.dwellLimit', 1, 1e6);
  requireWhole(section.seasonTicks, 'switched.seasonTicks', 0, 1e9);
  requireWhole(section.seasonBins, 'switched.seasonBins', 1, 1e6);
  requireLength(pairTo, 'switched.pairTo', P);
  for (let pair = 0; pair < P; pair++) {
    requireWhole(pairFrom[pair], `switched.pairFrom[${pair}]`, 0, M - 1);
    requireWhole(pairTo[pair], `switched.pairTo[${pair}]`, 0, M - 1);
  }
  const r = section.outlookBasis.length / model.horizon;
  requireWhole(r, 'switched.outlookBasis / horizon', 1, 64);
  requireWhole(correction.count, 'switched.correction.count', 0, 4096);
  const width = correction.count + 1 + summaryLength(section);
  const c = correction.basis.length / model.horizon;
  requireWhole(c, 'switched.correction.basis / horizon', 0, 64);
  const lengths: readonly (readonly [string, Float64Array, number])[] = [
    ['share', section.share, forecast.length * model.horizon],
    ['centre', section.centre, M * k],
    ['spread', section.spread, k],
    ['drift', section.drift, M * n],
    ['coupling', section.coupling, M * n * n],
    ['landing', section.landing, P * n * (n + 1)],
    ['hazard', section.hazard, P * (n + 2)],
    ['slope', section.slope, M * k * n],
    ['disturbanceLimit', section.disturbanceLimit, n],
    ['floodFrom', section.floodFrom, n],
    ['stops', section.stops, 3 * n],
    ['featureScale', section.featureScale, F],
    ['outlook', section.outlook, n * r * 2 * F],
    ['outlookBasis', section.outlookBasis, model.horizon * r],
    ['season', section.season, n * section.seasonBins],
    ['doubt', section.doubt, n * 2 * model.horizon],
    ['doubtScale', section.doubtScale, n * (1 + F)],
    ['correction.readout', correction.readout, forecast.length * c * width],
    ['correction.limit', correction.limit, forecast.length],
  ];
  for (const [name, values, expected] of lengths) {
    requireLength(values, `switched.${name}`, expected);
    requireWeights(values, `switched.${name}`);
    requireEach(
      values,
      `switched.${name}`,
      (value) => Math.abs(value) <= SECTION_LIMIT,
      `at most ${SECTION_LIMIT} in size`,
    );
  }
  requireEach(decays, 'switched.decays', (value) => value > 0 && value < 1, 'more than 0 and less than 1');
  requireEach(section.spread, 'switched.spread', (value) => value >= 1e-6, '1e-6 or more');
  requireEach(section.disturbanceLimit, 'switched.disturbanceLimit', (value) => value >= 1e-9, '1e-9 or more');
  requireEach(section.share, 'switched.share', (value) => value >= 0 && value <= 1, '0 to 1');
  requireEach(correction.limit, 'switched.correction.limit', (value) => value >= 0, 'zero or more');
  requireField(section.habit >= 0 && section.habit < 1, 'switched.habit', '0 to below 1', section.habit);
  for (let m = 0; m < M; m++) {
    requireField(
      modeIsStable(section.coupling.subarray(m * n * n, (m + 1) * n * n), n),
      `switched.coupling of mode ${m}`,
      'identity plus coupling of spectral radius 1 at most',
      'a larger one',
    );
  }
}

function requireChannels(channels: Int32Array, name: string, low: number, end: number, least: number): void {
  requireField(channels.length >= least, name, `at least ${least}`, channels.length);
  for (let k = 0; k < channels.length; k++) {
    const from = k === 0 ? low : channels[k - 1] + 1;
    requireField(
      channels[k] >= from && channels[k] < end,
      `${name}[${k}]`,
      `ascending, ${from} to ${end - 1}`,
      channels[k],
    );
  }
}

/**
 * Whether identity plus coupling grows nowhere: its 2¹⁴-th power, by repeated squaring, is no larger than a few. A radius
 * of 1.0002 would give 26 by then. A radius of one is allowed: a level keeps what flows in, and paths are clipped.
 *
 * shapes  coupling (n × n)
 * cost    O(n³ log ticks); once per model
 */
export function modeIsStable(coupling: Float64Array, n: number): boolean {
  let power = coupling.map((value, k) => value + (Math.floor(k / n) === k % n ? 1 : 0));
  let grown = 0;
  const first = largest(power);
  for (let s = 0; s < SQUARINGS; s++) {
    const next = new Float64Array(n * n);
    for (let i = 0; i < n; i++) {
      for (let j = 0; j < n; j++) {
        let sum = 0;
        for (let l = 0; l < n; l++) sum += power[i * n + l] * power[l * n + j];
        next[i * n + j] = sum;
      }
    }
    power = next;
    grown = largest(power);
    if (!(grown < 1e100)) return false;
  }
  return grown <= GROWTH_LIMIT * Math.max(1, first) * n;
}

function largest(values: Float64Array): number {
  let most = 0;
  for (const value of values) most = Math.max(most, Math.abs(value));
  return most;
}
