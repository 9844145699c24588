/**
 * What loss and disturbance cost: the readings of the judged part are spoilt, the model learned on clean ones, and the rise of
 * its error is set beside that of the window ridge, which carries the last reading forward where one is missing. Lost, spiked
 * and stuck readings leave the targets as they were; a shift and a ramp move the plant, and so the targets too.
 */
import { createState, forecastPath, type Model, update } from '@stillwell/runtime/filter';
import { type FitResult, fitWindowRidge } from '@stillwell/trainer';
import { meanOf } from './accuracy-errors.ts';
import type { Row } from './harness.ts';
import { row } from './harness.ts';
import { uniforms } from './known-plant.ts';

/** Readings from a series, what became of them, and what is to be forecast. */
interface Spoilt {
  readonly readings: readonly Float64Array[];
  readonly targets: readonly Float64Array[];
}

/** Spoils a copy of the readings from tick `from` on, in place. */
type Spoil = (values: readonly Float64Array[], from: number, scales: readonly number[], draw: () => number) => void;

interface Trouble {
  readonly name: string;
  readonly spoil: Spoil;
  /** The plant itself has moved: the spoilt readings are the targets. */
  readonly moves: boolean;
  readonly bar: number | null;
}

interface TickedSeries {
  readonly firstTick: number;
  readonly values: readonly Float64Array[];
}

const SEEDS = [1, 2, 3];
const GAP_TICKS = 6;
const STUCK_TICKS = 12;

const TROUBLES: readonly Trouble[] = [
  { name: '30 % of readings lost at random', spoil: lose(0.3), moves: false, bar: 0.03 },
  { name: '6-hour gaps of all signals, 20 % of time', spoil: gapsOfAll(0.2), moves: false, bar: 0.05 },
  { name: '6-hour gaps by signal, 30 % of time', spoil: gapsBySignal(0.3), moves: false, bar: 0.05 },
  { name: '1 % spikes of 8 sd', spoil: spikes(0.01, 8), moves: false, bar: null },
  { name: '12-hour stuck sensors, 10 % of time', spoil: stuck(0.1), moves: false, bar: null },
  { name: 'level shift of 1 sd', spoil: shift, moves: true, bar: null },
  { name: 'ramp of 1 sd in 1000 h', spoil: ramp, moves: true, bar: null },
];

/** A row a trouble: our rise beside the window ridge's, averaged over seeds. */
export function* robustRows(name: string, result: FitResult, series: TickedSeries): Iterable<Row> {
  const { model, hindcast } = result;
  const from = result.judged.fromTick - series.firstTick;
  const learnTicks = result.learn.toTick - result.learn.fromTick;
  const scales = Array.from(hindcast.scale);
  const maps = series.values.map((y) =>
    fitWindowRidge(y.subarray(0, learnTicks), model.horizon, result.chosen.periodTicks),
  );
  const ours = (spoilt: Spoilt): number =>
    mse(spoilt, from, scales, model.horizon, ourPaths(model, series.firstTick, spoilt));
  const ridge = (spoilt: Spoilt): number =>
    mse(spoilt, from, scales, model.horizon, ridgePaths(maps, model.horizon, spoilt));
  const clean: Spoilt = { readings: series.values, targets: series.values };
  const ourClean = ours(clean);
  const ridgeClean = ridge(clean);
  for (const { name: trouble, spoil, moves, bar } of TROUBLES) {
    const rises = SEEDS.map((seed) => {
      const readings = series.values.map((y) => y.slice());
      spoil(readings, from, scales, uniforms(seed));
      const spoilt = { readings, targets: moves ? readings : series.values };
      return [ours(spoilt) / ourClean - 1, ridge(spoilt) / ridgeClean - 1] as const;
    });
    yield row({
      suite: 'accuracy',
      case: `${name}, ${trouble}, mse rises by`,
      unit: 'share',
      ours: meanOf(rises.map((rise) => rise[0])),
      peer: meanOf(rises.map((rise) => rise[1])),
      peerName: 'window ridge',
      better: 'lower',
      bar,
    });
  }
}

/** Fills (ny × H) with the forecast of every signal from origin t; called for every tick in turn. */
type Paths = (t: number, out: Float64Array) => void;

function mse({ targets }: Spoilt, from: number, scales: readonly number[], horizon: number, paths: Paths): number {
  const ny = scales.length;
  const out = new Float64Array(ny * horizon);
  const cells = new Float64Array(ny * horizon);
  const last = targets[0]!.length - horizon;
  for (let t = 0; t < last; t++) {
    paths(t, out);
    if (t < from - 1) continue;
    for (let i = 0; i < ny; i++) {
      for (let h = 1; h <= horizon; h++)
        cells[i * horizon + h - 1]! += ((out[i * horizon + h - 1]! - targets[i]![t + h]!) / scales[i]!) ** 2;
    }
  }
  return meanOf(cells) / (last - from + 1);
}

function ourPaths(model: Model, firstTick: number, { readings }: Spoilt): Paths {
  const state = createState(model);
  const tick = new Float64Array(readings.length);
  return (t, out) => {
    for (let c = 0; c < tick.length; c++) tick[c] = readings[c]![t]!;
    update(model, state, firstTick + t, tick);
    forecastPath(model, state, out);
  };
}

function ridgePaths(maps: readonly ReturnType<typeof fitWindowRidge>[], horizon: number, { readings }: Spoilt): Paths {
  const carried = readings.map((y) => {
    let last = y.find((value) => !Number.isNaN(value)) ?? 0;
    return y.map((value) => {
      if (!Number.isNaN(value)) last = value;
      return last;
    });
  });
  return (t, out) => {
    maps.forEach((map, i) => {
      const y = carried[i]!;
      const path = out.subarray(i * horizon, (i + 1) * horizon).fill(y[t]!);
      if (map === null) return;
      for (let k = 1; k <= map.lags; k++) {
        const away = y[Math.max(0, t - k)]! - y[t]!;
        for (let h = 0; h < horizon; h++) path[h]! += away * map.weights[(k - 1) * horizon + h]!;
      }
    });
  };
}

function lose(share: number): Spoil {
  return (values, from, _scales, draw) => {
    for (const y of values) for (let t = from; t < y.length; t++) if (draw() < share) y[t] = Number.NaN;
  };
}

function gapsOfAll(share: number): Spoil {
  return (values, from, _scales, draw) => {
    for (const t of starts(values[0]!.length, from, share, GAP_TICKS, draw))
      for (const y of values) y.fill(Number.NaN, t, t + GAP_TICKS);
  };
}

function gapsBySignal(share: number): Spoil {
  return (values, from, _scales, draw) => {
    for (const y of values)
      for (const t of starts(y.length, from, share, GAP_TICKS, draw)) y.fill(Number.NaN, t, t + GAP_TICKS);
  };
}

function stuck(share: number): Spoil {
  return (values, from, _scales, draw) => {
    for (const y of values)
      for (const t of starts(y.length, from, share, STUCK_TICKS, draw)) y.fill(y[t]!, t, t + STUCK_TICKS);
  };
}

function spikes(share: number, size: number): Spoil {
  return (values, from, scales, draw) => {
    values.forEach((y, i) => {
      for (let t = from; t < y.length; t++) if (draw() < share) y[t]! += (draw() < 0.5 ? -size : size) * scales[i]!;
    });
  };
}

/** In the middle of the judged part, all signals. */
function shift(values: readonly Float64Array[], from: number, scales: readonly number[]): void {
  values.forEach((y, i) => {
    for (let t = (from + y.length) >> 1; t < y.length; t++) y[t]! += scales[i]!;
  });
}

function ramp(values: readonly Float64Array[], from: number, scales: readonly number[]): void {
  values.forEach((y, i) => {
    for (let t = from; t < y.length; t++) y[t]! += (scales[i]! * (t - from)) / 1000;
  });
}

/** Starts of runs that do not overlap and take up `share` of the ticks from `from` on, on average. */
function starts(ticks: number, from: number, share: number, length: number, draw: () => number): number[] {
  const found: number[] = [];
  const chance = share / (length * (1 - share) + share);
  for (let t = from; t < ticks; t++) {
    if (draw() >= chance) continue;
    found.push(t);
    t += length - 1;
  }
  return found;
}
