/**
 * Paths of a plant with switched equipment: sixteen roll-outs, each with its own draws, averaged. A path starts in a mode
 * by the belief, misses the disturbance's forecast by two curves times two normal numbers, and leaves a mode when the chance
 * of having stayed falls below a uniform number drawn for that stay. The draws are the same at every tick and on every
 * machine, so a forecast moves only because the plant does.
 */
import { multiply } from './dense.ts';
import { normalQuantile } from './normal-table.ts';
import { goOn, switchChance } from './switched-plant.ts';
import type { SwitchedSection } from './switched-section.ts';
import { type SwitchedCore, seasonAt } from './switched-step.ts';

/** Number of paths. */
export const PATHS = 16;
/** Stays of one path with draws of their own; later ones use them again. */
const STAYS = 64;

/**
 * Draws and buffers of the paths.
 *
 * shapes  n driven and k near-discrete signals, H steps
 * units   standardised
 */
export interface Rollout {
  /** (PATHS) place of the start in the belief's cumulative sum; (PATHS × 2) normal numbers; (PATHS × STAYS) uniform ones. */
  readonly start: Float64Array;
  readonly miss: Float64Array;
  readonly stay: Float64Array;
  /** (n × H) sum of the disturbance's forecast, then each step's; season included. */
  readonly outlook: Float64Array;
  /** (n) clips */
  readonly low: Float64Array;
  readonly high: Float64Array;
  /** (n) the same narrowed to the stops, for the path under way. */
  readonly bottom: Float64Array;
  readonly top: Float64Array;
  readonly z: Float64Array;
  readonly along: Float64Array;
  readonly other: Float64Array;
  readonly push: Float64Array;
  /** ((n + k) × H) sums over the paths: driven, then near-discrete. */
  readonly sums: Float64Array;
  /** (n + k) which of the forecast signals a row is, −1: none. */
  readonly place: Int32Array;
  /** (q × PATHS × H) how far each path of a forecast signal lies from what is forecast, as of the last whole roll-out. */
  readonly away: Float64Array;
}

/**
 * Draws the numbers and makes the buffers.
 *
 * shapes  low, high (nc) clips of all channels, standardised
 * source  xorshift32, Marsaglia (2003), Xorshift RNGs, triple (13, 17, 5); one draw in each of PATHS equal strata
 */
export function createRollout(
  section: SwitchedSection,
  horizon: number,
  low: Float64Array,
  high: Float64Array,
): Rollout {
  const n = section.driven.length;
  let x = 2463534242 | 0;
  const below = (count: number): number => {
    x ^= x << 13;
    x ^= x >>> 17;
    x ^= x << 5;
    return (x >>> 0) % count;
  };
  const strata = new Float64Array(PATHS);
  const shuffled = (): Float64Array => {
    for (let p = 0; p < PATHS; p++) strata[p] = (p + 0.5) / PATHS;
    for (let p = PATHS - 1; p > 0; p--) {
      const q = below(p + 1);
      const kept = strata[p];
      strata[p] = strata[q];
      strata[q] = kept;
    }
    return strata;
  };
  const start = shuffled().slice();
  const miss = new Float64Array(2 * PATHS);
  for (let curve = 0; curve < 2; curve++) {
    shuffled().forEach((share, p) => {
      miss[2 * p + curve] = normalQuantile(share);
    });
  }
  const stay = new Float64Array(PATHS * STAYS);
  for (let s = 0; s < STAYS; s++) {
    shuffled().forEach((share, p) => {
      stay[p * STAYS + s] = share;
    });
  }
  const rows = [...section.driven, ...section.discrete];
  const pick = (clips: Float64Array): Float64Array => Float64Array.from(section.driven, (c) => clips[c]);
  return {
    start,
    miss,
    stay,
    outlook: new Float64Array(n * horizon),
    low: pick(low),
    high: pick(high),
    bottom: new Float64Array(n),
    top: new Float64Array(n),
    z: new Float64Array(n),
    along: new Float64Array(n),
    other: new Float64Array(n),
    push: new Float64Array(n),
    sums: new Float64Array(rows.length * horizon),
    place: Int32Array.from(rows, (channel) => section.forecast.indexOf(channel)),
    away: new Float64Array(section.forecast.length * PATHS * horizon),
  };
}

/**
 * Mean paths of all driven and near-discrete signals, to `rollout.sums`.
 *
 * shapes  value (nc) of the tick `tick`, folded in; sums ((n + k) × H), its first `steps` columns written
 * units   standardised
 * cost    O(PATHS · steps · (n² + P n + k n)); allocates nothing
 */
export function rollOut(
  section: SwitchedSection,
  core: SwitchedCore,
  rollout: Rollout,
  tick: number,
  value: Float64Array,
  horizon: number,
  steps: number,
): void {
  foresee(section, core, rollout, tick, horizon, steps);
  rollout.sums.fill(0);
  for (let p = 0; p < PATHS; p++) onePath(section, core, rollout, value, horizon, steps, p);
  if (steps === horizon) center(section, rollout, horizon);
}

/** From the paths of the forecast signals to how far they lie from their mean, by the section's share in the forecast. */
function center(section: SwitchedSection, { place, sums, away }: Rollout, horizon: number): void {
  for (let row = 0; row < place.length; row++) {
    const q = place[row];
    if (q < 0) continue;
    for (let h = 0; h < horizon; h++) {
      const share = section.share[q * horizon + h];
      const mean = sums[row * horizon + h];
      for (let cell = q * PATHS * horizon + h; cell < (q + 1) * PATHS * horizon; cell += horizon) {
        away[cell] = share * (away[cell] - mean);
      }
    }
  }
}

/** Steps of the disturbance's forecast, season included. */
function foresee(
  section: SwitchedSection,
  core: SwitchedCore,
  rollout: Rollout,
  tick: number,
  horizon: number,
  steps: number,
): void {
  const n = section.driven.length;
  const r = core.coefficients.length / n;
  const { outlook } = rollout;
  for (let i = 0; i < n; i++) {
    const at = i * horizon;
    multiply(section.outlookBasis, steps, r, core.coefficients, i * r, outlook, at);
    for (let h = steps - 1; h > 0; h--) outlook[at + h] -= outlook[at + h - 1];
    for (let h = 0; h < steps; h++) outlook[at + h] += core.flood[i] + seasonAt(section, i, tick + 1 + h);
  }
}

function onePath(
  section: SwitchedSection,
  core: SwitchedCore,
  rollout: Rollout,
  value: Float64Array,
  horizon: number,
  steps: number,
  p: number,
): void {
  const { driven, pairFrom, doubt } = section;
  const n = driven.length;
  const { z, along, push, outlook, miss, low, high, sums } = rollout;
  let mode = startMode(section, core, rollout, p);
  let dwell = core.memory[core.dwellAt];
  let stays = 0;
  let left = 1;
  for (let i = 0; i < n; i++) {
    z[i] = value[driven[i]];
    // A stop was learned from the past: a signal that stands beyond it has shown it wrong.
    rollout.bottom[i] = Math.max(low[i], Math.min(section.stops[i], z[i]));
    rollout.top[i] = Math.min(high[i], Math.max(section.stops[n + i], z[i]));
  }
  for (let h = 0; h < steps; h++) {
    for (let i = 0; i < n; i++) {
      const curve = 2 * i * horizon + h;
      push[i] =
        outlook[i * horizon + h] +
        core.doubt[i] * (miss[2 * p] * doubt[curve] + miss[2 * p + 1] * doubt[curve + horizon]);
    }
    goOn(section, mode, z, 0, push, along);
    let to = -1;
    let pairTaken = 0;
    for (let pair = 0; pair < pairFrom.length && to < 0; pair++) {
      if (pairFrom[pair] !== mode) continue;
      left *= 1 - switchChance(section, pair, along, dwell);
      if (left >= rollout.stay[p * STAYS + stays]) continue;
      to = section.pairTo[pair];
      pairTaken = pair;
    }
    if (to < 0) {
      dwell++;
      for (let i = 0; i < n; i++) z[i] = along[i];
    } else {
      land(section, rollout, pairTaken, to);
      mode = to;
      dwell = 1;
      left = 1;
      stays = stays + 1 === STAYS ? 0 : stays + 1;
    }
    for (let i = 0; i < n; i++) {
      if (z[i] < rollout.bottom[i]) z[i] = rollout.bottom[i];
      else if (z[i] > rollout.top[i]) z[i] = rollout.top[i];
      sums[i * horizon + h] += z[i] / PATHS;
      if (steps === horizon && rollout.place[i] >= 0) rollout.away[(rollout.place[i] * PATHS + p) * horizon + h] = z[i];
    }
    addDiscrete(section, core, rollout, mode, horizon, h, steps === horizon ? p : -1);
  }
}

/** The path's number, not its share, is passed: a fraction passed on is put on the heap. */
function startMode(section: SwitchedSection, core: SwitchedCore, { start }: Rollout, p: number): number {
  let sum = 0;
  for (let m = 0; m < section.modeCount; m++) {
    sum += core.memory[core.beliefAt + m];
    if (start[p] <= sum) return m;
  }
  return core.memory[core.modeAt];
}

/** z after a switch: halfway between what old and new mode give, plus an affine function of the former. */
function land(section: SwitchedSection, rollout: Rollout, pair: number, to: number): void {
  const n = section.driven.length;
  const { z, along, other, push } = rollout;
  goOn(section, to, z, 0, push, other);
  for (let i = 0; i < n; i++) {
    const row = (pair * n + i) * (n + 1);
    let sum = (along[i] + other[i]) / 2 + section.landing[row];
    for (let j = 0; j < n; j++) sum += section.landing[row + 1 + j] * along[j];
    z[i] = sum;
  }
}

function addDiscrete(
  section: SwitchedSection,
  core: SwitchedCore,
  { z, sums, place, away }: Rollout,
  mode: number,
  horizon: number,
  h: number,
  p: number,
): void {
  const { discrete, centre, slope } = section;
  const k = discrete.length;
  const n = z.length;
  for (let s = 0; s < k; s++) {
    let sum = centre[mode * k + s] + core.memory[core.habitAt + mode * k + s];
    const row = (mode * k + s) * n;
    for (let j = 0; j < n; j++) sum += slope[row + j] * z[j];
    sums[(n + s) * horizon + h] += sum / PATHS;
    if (p >= 0 && place[n + s] >= 0) away[(place[n + s] * PATHS + p) * horizon + h] = sum;
  }
}
