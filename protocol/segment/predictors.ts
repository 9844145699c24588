/**
 * One channel's distribution over its next lattice index: a mixture of predictors.
 *
 *   corrected  the forecast, moved by what the other channels' residuals say (cross.ts)      narrow and wide
 *   forecast   the filter's one-step forecast as it stands                                   narrow and wide
 *   last       the last value                                                                narrow and wide
 *   repeat     exactly the last value
 *   levels     the count table of values that come back (levels.ts)
 *
 * The first three stand twice: on every index, and on the values already seen alone (seen.ts), mixed by a share of its own.
 *
 * Each of the first three errs by a Student t (student.ts) whose scale follows its own recent errors. The weights follow
 * the share of each reading that each predictor explains (expectation-maximisation on the run: Titterington 1984). The
 * shares move fast, at a rate of 1/5, because plants change their manner from hour to hour.
 *
 * Float64 with + - × ÷ √ in a fixed order only: the same bits everywhere. Not for judging forecasts.
 */
import { LevelTable } from './levels.ts';
import { SeenValues } from './seen.ts';
import { upperTail } from './student.ts';

const SPREADS = [0.45, 0.9] as const;
const CENTRES = 3;
const CONTINUOUS = CENTRES * SPREADS.length;
const REPEAT = CONTINUOUS;
const LEVELS = CONTINUOUS + 1;
const EXPERTS = CONTINUOUS + 2;
/** Weights at the start, in the order above. */
const FIRST_WEIGHTS = [0.22, 0.22, 0.13, 0.13, 0.11, 0.11, 0.04, 0.04] as const;

const WEIGHT_RATE = 0.2;
const WEIGHT_PRIOR = 3;
/** Share of weight dealt out evenly after each reading, so that no predictor is ever lost. */
const WEIGHT_SHARED = 0.001;
/** Below this weight the count table is left out of the sums, which it would slow for nothing. */
const SILENT = 1 / 512;
/** Share of the seen values at the start, and how it moves. */
const FIRST_SEEN = 0.1;
const SEEN_RATE = 1 / 50;
const SEEN_PRIOR = 8;
const LEAST_SEEN = 0.01;
const MOST_SEEN = 0.995;
/** Seen values join the sums while they name readings this much better on the run than plain indices do. */
const WORTH = 1.05;
const WORTH_RATE = 1 / 32;
const FIRST_WORTH = 1.5;
/** One reading counts so much at most. */
const MOST_WORTH = 8;
/** Below this probability nothing is learnt about weights: the differences of tails have no digits left. */
const LEAST_TOTAL = 1e-200;
const SCALE_RATE = 0.02;
const SCALE_PRIOR = 10;
/** Where the bundle names no scale the first guess gives way sooner. */
const UNKNOWN_SCALE_PRIOR = 2;
const UNKNOWN_SCALE = 16;
/** Mean absolute error to standard deviation, near enough for a normal: √(π/2) = 1.253. */
const MEAN_TO_SCALE = 1.2;
/** An error counts in the scale up to so many times the scale. */
const SCALE_CLIP = 5;
/** Least width in lattice steps: a forecast that is always right stays cheap, one miss stays payable. */
const LEAST_WIDTH = 1 / 16;
const LEAST_SCALE = 1 / 64;
const MOST_SCALE = 2 ** 41;
/** The last value errs somewhat more than the forecast, or there would be no point in one. */
const LAST_SCALE = 1.25;

/** The mixture of predictors of one channel: its weights, widths and tables, moved alike by coder and decoder. */
export class Predictors {
  /** Two sets, by whether the value before was a repeat: machines at rest are another plant than machines at work. */
  readonly #weightSets = [Float64Array.from(FIRST_WEIGHTS), Float64Array.from(FIRST_WEIGHTS)] as const;
  readonly #learnt = new Float64Array(2);
  readonly #masses = new Float64Array(EXPERTS);
  readonly #centres = new Float64Array(CENTRES);
  readonly #scales = new Float64Array(CENTRES);
  /** 1 / width of each continuous predictor. */
  readonly #inverse = new Float64Array(CONTINUOUS);
  readonly #levels = new LevelTable();
  readonly #seenValues = new SeenValues();
  #seenShare = FIRST_SEEN;
  #seenWorth = FIRST_WORTH;
  #seenSpeak = false;
  /** Twice edge, sign, spread: the work of this reading that may be asked for again. Sign 0: nothing. */
  readonly #kept = new Float64Array(6);
  readonly #scalePrior: number;
  /** The set in use for the reading at hand. */
  #weights: Float64Array = this.#weightSets[0];
  #levelsSpeak = false;
  #levelsKnow = false;
  #repeated: 0 | 1 = 0;
  #last = 0;
  #pivot = 0;
  #width = 0;
  #seen = 0;

  /** `scale`: expected size of a residual in lattice steps, from the bundle; not finite or not positive where unknown. */
  constructor(scale: number) {
    const known = scale > 0 && Number.isFinite(scale);
    this.#scalePrior = known ? SCALE_PRIOR : UNKNOWN_SCALE_PRIOR;
    const first = within(known ? scale : UNKNOWN_SCALE, LEAST_SCALE, MOST_SCALE);
    this.#scales[0] = first;
    this.#scales[1] = first;
    this.#scales[2] = LAST_SCALE * first;
  }

  /** Whether a value has been learnt in this segment. */
  get hasLast(): boolean {
    return this.#seen > 0;
  }

  get last(): number {
    return this.#last;
  }

  /** Scale of the forecast's errors now, in lattice steps. */
  get scale(): number {
    return this.#scales[1]!;
  }

  /** Readies the mixture for one reading: where each predictor stands, in lattice steps. */
  prepare(corrected: number, forecast: number): void {
    if (this.#seen === 0) this.#last = Math.round(forecast);
    this.#centres[0] = corrected;
    this.#centres[1] = forecast;
    this.#centres[2] = this.#last;
    for (let i = 0; i < CENTRES; i++)
      for (let j = 0; j < SPREADS.length; j++)
        this.#inverse[i * SPREADS.length + j] = 1 / (this.#scales[i]! * SPREADS[j]! + LEAST_WIDTH);
    this.#weights = this.#weightSets[this.#repeated];
    this.#levelsKnow = this.#levels.prepare(this.#last);
    this.#levelsSpeak = this.#levelsKnow && this.#weights[LEVELS]! > SILENT;
    this.#seenSpeak = this.#seenValues.isReady && this.#seenWorth > WORTH;
    this.#kept[1] = 0;
    this.#kept[4] = 0;
    const heaviest = this.#heaviest();
    this.#pivot = heaviest < CONTINUOUS ? Math.round(this.#centres[heaviest >> 1]!) : this.#last;
    this.#width = heaviest < CONTINUOUS ? 1 / this.#inverse[heaviest]! : 0;
  }

  /** Whole number near the middle of the heaviest predictor: where coding starts. */
  get pivot(): number {
    return this.#pivot;
  }

  /** Width of the heaviest predictor, in lattice steps; 0 for those that name exact values. */
  get width(): number {
    return this.#width;
  }

  /** Probability that sign × index ≥ x, for whole x; falls short of 1 by the table's weight where it is silent. */
  tail(sign: number, x: number): number {
    let sum = this.#spread(sign, x - 0.5);
    if (this.#seenSpeak) {
      const edge = this.#seenValues.edge(sign, x);
      sum += this.#seenShare * ((Number.isNaN(edge) ? 0 : this.#spreadKept(sign, edge)) - sum);
    }
    if (sign * this.#last >= x) sum += this.#weights[REPEAT]!;
    if (this.#levelsSpeak) sum += this.#weights[LEVELS]! * this.#levels.tail(sign, x);
    return sum;
  }

  /** Weighted probability that sign × error puts the value beyond `edge`, over the predictors with an error. */
  #spread(sign: number, edge: number): number {
    let sum = 0;
    for (let i = 0; i < CENTRES; i++) {
      const distance = edge - sign * this.#centres[i]!;
      const e = 2 * i;
      sum += this.#weights[e]! * upperTail(distance * this.#inverse[e]!);
      sum += this.#weights[e + 1]! * upperTail(distance * this.#inverse[e + 1]!);
    }
    return sum;
  }

  /** As spread, kept for the two edges used last: halving asks for the same ones again and again. */
  #spreadKept(sign: number, edge: number): number {
    const kept = this.#kept;
    if (kept[0] === edge && kept[1] === sign) return kept[2]!;
    if (kept[3] === edge && kept[4] === sign) return kept[5]!;
    kept.copyWithin(3, 0, 3);
    kept[0] = edge;
    kept[1] = sign;
    kept[2] = this.#spread(sign, edge);
    return kept[2]!;
  }

  /** Takes the first value where nothing was forecast: there is no error to learn from. */
  start(index: number): void {
    this.#seen++;
    this.#levels.learn(index, index);
    this.#seenValues.add(index);
    this.#last = index;
  }

  /** Learns from the index that came. A value that was named exactly says nothing about the scale of errors. */
  learn(index: number): void {
    this.#seen++;
    const erring = this.#learnWeights(index);
    const rate = erring * Math.max(SCALE_RATE, 1 / (this.#seen + this.#scalePrior));
    for (let i = 0; i < CENTRES; i++) {
      const scale = this.#scales[i]!;
      const error = Math.min(Math.abs(index - this.#centres[i]!), SCALE_CLIP * scale + 1);
      this.#scales[i] = within(scale + rate * (MEAN_TO_SCALE * error - scale), LEAST_SCALE, MOST_SCALE);
    }
    this.#levels.learn(this.#last, index);
    this.#seenValues.add(index);
    this.#repeated = index === this.#last ? 1 : 0;
    this.#last = index;
  }

  /** Moves the weights; gives the share of `index` that plain errors explain, against values named exactly. */
  #learnWeights(index: number): number {
    const masses = this.#masses;
    const weights = this.#weights;
    let plain = 0;
    for (let i = 0; i < CONTINUOUS; i++) {
      masses[i] = massBetween(index - 0.5, index + 0.5, this.#centres[i >> 1]!, this.#inverse[i]!);
      plain += weights[i]! * masses[i]!;
    }
    masses[REPEAT] = index === this.#last ? 1 : 0;
    masses[LEVELS] = this.#levelsKnow ? this.#levels.massOf(index) : 0;
    const named = weights[REPEAT]! * masses[REPEAT] + weights[LEVELS]! * masses[LEVELS];
    if (this.#seenValues.isReady) this.#learnSeen(index, plain);
    let total = 0;
    for (let i = 0; i < EXPERTS; i++) total += weights[i]! * masses[i]!;
    if (!(total > LEAST_TOTAL)) return 1;
    const rate = Math.max(WEIGHT_RATE, 1 / (++this.#learnt[this.#repeated]! + WEIGHT_PRIOR));
    for (let i = 0; i < EXPERTS; i++) {
      const explained = (weights[i]! * masses[i]!) / total;
      weights[i] = (weights[i]! + rate * (explained - weights[i]!)) * (1 - WEIGHT_SHARED) + WEIGHT_SHARED / EXPERTS;
    }
    return plain + named > LEAST_TOTAL ? plain / (plain + named) : 1;
  }

  /** Judges the seen values by what they gave this reading; where they speak, the masses become the mixture's. */
  #learnSeen(index: number, plain: number): void {
    const masses = this.#masses;
    const share = this.#seenShare;
    const seen = this.#seenValues;
    const known = seen.find(index);
    let onSeen = 0;
    for (let i = 0; i < CONTINUOUS; i++) {
      const mass = known ? massBetween(seen.low, seen.high, this.#centres[i >> 1]!, this.#inverse[i]!) : 0;
      onSeen += this.#weights[i]! * mass;
      if (this.#seenSpeak) masses[i]! += share * (mass - masses[i]!);
    }
    const both = plain + share * (onSeen - plain);
    if (!(plain > LEAST_TOTAL && both > LEAST_TOTAL)) return;
    this.#seenWorth += WORTH_RATE * (Math.min(onSeen / plain, MOST_WORTH) - this.#seenWorth);
    const rate = Math.max(SEEN_RATE, 1 / (this.#seen + SEEN_PRIOR));
    this.#seenShare = within(share + rate * ((share * onSeen) / both - share), LEAST_SEEN, MOST_SEEN);
  }

  #heaviest(): number {
    let best = 0;
    for (let i = 1; i < EXPERTS; i++) if (this.#weights[i]! > this.#weights[best]!) best = i;
    return best;
  }
}

/** Probability of low..high, taken on the tail's side so that it does not cancel. */
function massBetween(low: number, high: number, centre: number, inverse: number): number {
  const from = (low - centre) * inverse;
  const to = (high - centre) * inverse;
  return from + to > 0 ? upperTail(from) - upperTail(to) : upperTail(-to) - upperTail(-from);
}

function within(value: number, least: number, most: number): number {
  return value < least ? least : Math.min(value, most);
}
