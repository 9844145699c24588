/** Gathers factors from a history chunk by chunk, in memory that does not grow with it. */
import { TrainError } from '../errors.ts';
import type { Series } from '../history/series.ts';
import type { Factors, FactorsShape } from './factors.ts';
import { gridOf } from './moments.ts';
import { bringState, type Carrier, takeState } from './open-state.ts';
import { Readings } from './readings.ts';
import { RunBook } from './run-book.ts';

/** Bytes of the ends of runs, about: the more places and channels, the fewer ends are kept. */
const END_BYTES = 1 << 22;
const LEAST_ENDS = 8;
const MOST_ENDS = 64;

/**
 * How many ends of runs factors of a shape keep.
 *
 * shapes  none
 * units   a count
 * throws  nothing
 * source  own choice
 * cost    trivial
 */
export function mostEnds(channels: number, places: number): number {
  return Math.max(LEAST_ENDS, Math.min(MOST_ENDS, Math.floor(END_BYTES / (8 * channels * places))));
}

/** Takes consecutive chunks. */
export class FactorsGatherer {
  readonly #shape: FactorsShape;
  readonly #readings: Readings;
  readonly #book: RunBook;
  #fromTick: number | null;
  #toTick: number;
  #ticks: number;

  /** From nothing, or on from factors of the same site. */
  constructor(shape: FactorsShape, start: Factors | null = null) {
    this.#shape = shapeIn(shape);
    const channels = shape.names.length;
    const grid = gridOf(shape);
    const { reach, longestHorizon, halfLifeTicks } = shape;
    const book = {
      channels,
      grid,
      reach,
      longestHorizon,
      halfLifeTicks,
      mostEnds: mostEnds(channels, grid.lags.length),
    };
    this.#book = new RunBook(book, start);
    this.#readings = new Readings(shape, this.#book, start);
    this.#fromTick = start?.fromTick ?? null;
    this.#toTick = start?.toTick ?? 0;
    this.#ticks = start?.ticks ?? 0;
  }

  /** The next chunk, in the channels' units; ticks left out since the last are missing. */
  take(series: Series): void {
    const { names, tickMs } = this.#shape;
    if (series.values.length !== names.length || series.tickMs !== tickMs) {
      throw new RangeError(
        `A chunk of ${series.values.length} channels at ${series.tickMs} ms, not ${names.length} at ${tickMs}.`,
      );
    }
    if (this.#fromTick === null) {
      this.#fromTick = series.firstTick;
      this.#toTick = series.firstTick;
    }
    if (series.firstTick < this.#toTick) {
      throw new TrainError(
        'factors',
        `a chunk from ${labelOf(series.firstTick, tickMs)} comes after factors up to ${labelOf(this.#toTick, tickMs)}; ` +
          'what is in must not count twice: give only what is newer',
        { details: { firstTick: series.firstTick, toTick: this.#toTick } },
      );
    }
    this.#readings.skip(series.firstTick - this.#toTick);
    this.#readings.take(series);
    this.#toTick = series.firstTick + series.ticks;
    this.#ticks += series.ticks;
  }

  /** All that is open, to go on from after an interrupt to the bit; this one goes on untouched. */
  snapshot(): Uint8Array {
    return takeState(this.#shape, (carrier) => this.#carry(carrier));
  }

  /**
   * Goes on from a snapshot.
   *
   * throws  as `bringState`
   */
  static restore(shape: FactorsShape, bytes: Uint8Array): FactorsGatherer {
    const gatherer = new FactorsGatherer(shape);
    bringState(gatherer.#shape, bytes, (carrier) => gatherer.#carry(carrier));
    return gatherer;
  }

  /** What is in so far; more may follow. */
  end(): Factors {
    return this.#factors(false);
  }

  /** The same without copies of what is large, to be written down before anything follows. */
  lend(): Factors {
    return this.#factors(true);
  }

  #factors(isLent: boolean): Factors {
    const books = this.#book.read(isLent);
    return Object.freeze({
      ...this.#shape,
      fromTick: this.#fromTick ?? 0,
      toTick: this.#toTick,
      ticks: this.#ticks,
      offsets: this.#readings.offsets.slice(),
      ...books,
      waiting: this.#readings.state(),
    });
  }

  #carry(carrier: Carrier): void {
    const fromTick = carrier.number(this.#fromTick ?? Number.NaN);
    this.#fromTick = Number.isNaN(fromTick) ? null : fromTick;
    this.#toTick = carrier.number(this.#toTick);
    this.#ticks = carrier.number(this.#ticks);
    this.#readings.carry(carrier);
    this.#book.carry(carrier);
  }
}

/** The shape alone, of whatever carries one. */
function shapeIn(from: FactorsShape): FactorsShape {
  const { site, tickMs, names, units, signalCount, schema, halfLifeTicks } = from;
  const { reach, longestHorizon, longestRound, longGapTicks } = from;
  return {
    site,
    tickMs,
    names,
    units,
    signalCount,
    schema,
    halfLifeTicks,
    reach,
    longestHorizon,
    longestRound,
    longGapTicks,
  };
}

function labelOf(tick: number, tickMs: number): string {
  return new Date(tick * tickMs).toISOString();
}
