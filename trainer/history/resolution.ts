/**
 * The lattice a sensor's readings lie on: the largest step that explains every printed value exactly.
 *
 * First the decimals: the fewest that give every value back, where values carried in 32-bit floats on the way
 * (5.827000141143799 for 5.827) count as the decimals they stand for. Then a coarser step (0.5, 0.02, 16), only when ALL values are
 * multiples of it and enough different ones were seen; a step that fits most values would lose the rest for ever.
 * Values with more digits than a sensor has (computed ones) get a step well below their own movement, and the survey says so.
 */
import { latticeIndex, latticeValue, type Signal, type Site } from '@stillwell/protocol';
import { channelsOf } from './channels.ts';
import type { History } from './history.ts';
import { quantiles } from './order-statistics.ts';

/** Readings are offset + k × step for whole k. */
export interface Lattice {
  readonly step: number;
  readonly offset: number;
}

/** How a lattice was found; 'computed' ones round the values. */
export interface FoundLattice extends Lattice {
  readonly how: 'declared' | 'decimals' | 'float32 decimals' | 'multiples' | 'computed' | 'no readings';
}

/** Decimals looked for in values of about 1; as many more in smaller ones, up to what a step's reciprocal can hold. */
const MAX_DECIMALS = 9;
const MOST_DECIMALS = 15;
/** Rounding of a few operations in double precision, relative. */
const DOUBLE_TOLERANCE = 2 ** -50;
/** Half a unit in the last place of a 32-bit float, relative, and a little. */
const SINGLE_TOLERANCE = 2 ** -24 * 1.01;
/** Beyond this a double holds no fraction that could contradict a step. */
const EXACT = 2 ** 51;
/** Fewer different values than these prove no step coarser than the decimals: a valve seen at 0 and 100 may stand at 50. */
const DISTINCT_FOR_MULTIPLES = 30;

/** Fewest decimals that explain all values within a relative tolerance; -1 where none do. */
function decimalsOf(values: Float64Array, tolerance: number, most: number): number {
  let decimals = 0;
  let power = 1;
  for (let i = 0; i < values.length; i++) {
    const value = values[i] as number;
    if (Number.isNaN(value)) continue;
    for (;;) {
      const scaled = Math.abs(value) * power;
      const slack = scaled * tolerance;
      if (scaled >= EXACT || Math.abs(scaled - Math.round(scaled)) <= slack) break;
      if (++decimals > most) return -1;
      power = 10 ** decimals;
    }
  }
  return decimals;
}

/** True where every value is a 32-bit float, printed with enough digits. */
function isSingle(values: Float64Array): boolean {
  return values.every(
    (value) => Number.isNaN(value) || Math.abs(value - Math.fround(value)) <= Math.abs(value) * DOUBLE_TOLERANCE,
  );
}

function largest(values: Float64Array): number {
  let most = 0;
  for (const value of values) if (Math.abs(value) > most) most = Math.abs(value);
  return most;
}

function mostDecimals(values: Float64Array): number {
  const size = largest(values);
  return size > 0
    ? Math.min(MOST_DECIMALS, MAX_DECIMALS + Math.max(0, -Math.floor(Math.log10(size)) - 1))
    : MAX_DECIMALS;
}

/** Decimals of values that went through 32-bit floats; -1 where the fit would prove nothing or fails. */
function singleDecimals(values: Float64Array): number {
  if (!isSingle(values)) return -1;
  const finest = Math.floor(-Math.log10(largest(values) * SINGLE_TOLERANCE * 8));
  return finest < 0 ? -1 : decimalsOf(values, SINGLE_TOLERANCE, Math.min(mostDecimals(values), finest));
}

function greatestDivisor(a: number, b: number): number {
  while (b > 0) [a, b] = [b, a % b];
  return a;
}

/** A coarser lattice than the decimals' that gives every value back; null where there is none. */
function multiplesOf(values: Float64Array, decimals: number): Lattice | null {
  const power = 10 ** decimals;
  let first = Number.NaN;
  let divisor = 0;
  for (const value of values) {
    if (Number.isNaN(value)) continue;
    const k = Math.round(value * power);
    if (Number.isNaN(first)) first = k;
    divisor = greatestDivisor(Math.abs(k - first), divisor);
    if (divisor === 1) return null;
  }
  if (divisor === 0) return null;
  const lattice = { step: divisor / power, offset: (((first % divisor) + divisor) % divisor) / power };
  const seen = new Set<number>();
  for (const value of values) {
    if (Number.isNaN(value)) continue;
    const k = latticeIndex(value, lattice.step, lattice.offset);
    if (latticeValue(k, lattice.step, lattice.offset) !== Math.round(value * power) / power) return null;
    if (seen.size < DISTINCT_FOR_MULTIPLES) seen.add(k);
  }
  return seen.size >= DISTINCT_FOR_MULTIPLES ? lattice : null;
}

/** A power of ten well below the values' own movement, for values without a sensor's lattice. */
function computedStep(values: Float64Array): number {
  const [least, low, middle, high, greatest] = quantiles(values, [0, 0.01, 0.5, 0.99, 1]) as [
    number,
    number,
    number,
    number,
    number,
  ];
  const spread = high - low || greatest - least || Math.abs(middle) || 1;
  const moves = new Float64Array(values.length);
  for (let i = 1; i < values.length; i++)
    moves[i] = Math.abs((values[i] as number) - (values[i - 1] as number)) || Number.NaN;
  moves[0] = Number.NaN;
  const usual = quantiles(moves, [0.5])[0] as number;
  const movement = Number.isNaN(usual) ? spread : usual;
  return 10 ** Math.floor(Math.log10(Math.max(spread / 1e6, Math.min(spread / 1e4, movement / 8))));
}

/**
 * Lattice of one channel's readings; NaN marks missing ones.
 *
 * cost  O(n) and one pass in most cases
 */
export function findLattice(values: Float64Array): FoundLattice {
  if (values.every((value) => Number.isNaN(value))) return { step: 1, offset: 0, how: 'no readings' };
  let how: FoundLattice['how'] = 'decimals';
  let decimals = decimalsOf(values, DOUBLE_TOLERANCE, mostDecimals(values));
  if (decimals < 0) {
    how = 'float32 decimals';
    decimals = singleDecimals(values);
  }
  if (decimals < 0) return { step: computedStep(values), offset: 0, how: 'computed' };
  const coarser = multiplesOf(values, decimals);
  return coarser ? { ...coarser, how: 'multiples' } : { step: 1 / 10 ** decimals, offset: 0, how };
}

function latticeOf(signal: Signal, values: Float64Array): FoundLattice {
  if (signal.resolution !== null) return { step: signal.resolution, offset: 0, how: 'declared' };
  const found = findLattice(values);
  const isAdded = signal.aggregate === 'sum' || signal.aggregate === 'increment';
  // Sums of readings leave a shifted lattice, never one through zero.
  return isAdded && found.offset !== 0 ? findLattice(Float64Array.of(found.step, found.offset)) : found;
}

/** Lattice of every channel, in channel order: the site file's resolution, else found in the readings. */
export function findLattices(history: History, site: Site): FoundLattice[] {
  return channelsOf(site).map((signal, c) =>
    latticeOf(signal, (history.channels[c] as { values: Float64Array }).values),
  );
}
