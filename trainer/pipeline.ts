/**
 * From a history to a candidate bundle, the steps in order: split by time, clean, learn, shrink, round, calibrate, judge.
 * The same series, site, options and seed give the same bytes; nothing here reads a clock into the document.
 */
import { type Bundle, decodeBundle, encodeBundle, MAX_SIGNATURES } from '@stillwell/protocol';
import { type Model, modelFromBundle } from '@stillwell/runtime/filter';
import { type Composition, composeBundle, documentBytes, judgeTable, placeholderJudge } from './compose.ts';
import { TrainError } from './errors.ts';
import type { FitInput, FitOptions } from './fit-options.ts';
import type { Series } from './history/series.ts';
import { bankName, featureCount } from './identify/bank.ts';
import type { Earlier } from './identify/earlier.ts';
import { type Prepared, prepareHistory, scalingsForAll } from './identify/prepare.ts';
import { responseRoom } from './identify/response.ts';
import { type Taught, teach } from './identify/teach.ts';
import { type AskedLimit, declaredLimits } from './judge/crossings.ts';
import { judge, type Verdicts, verdictSteps } from './judge/gate.ts';
import { type Hindcast, hindcast } from './judge/hindcast.ts';
import { scoreEvery } from './judge/origin-budget.ts';
import { type PlanWorth, planWorth } from './judge/plan-worth.ts';
import { type Reliance, reliance } from './judge/reliance.ts';
import { settle } from './judge/settle.ts';
import { type Candidate, type KindSections, withCalibration } from './kinds/candidate.ts';
import { chooseKind, type KindChoice, type Tried } from './kinds/choose-kind.ts';
import { learnPlans, type Plans, plannedInputs } from './plans.ts';
import { type Audit, auditRounding } from './quantise/audit.ts';
import { type Calibration, openCalibration, type Surroundings } from './quantise/float-model.ts';
import { checkOptions, type Split, splitHistory } from './requirements.ts';
import type { TickSpan } from './span.ts';
import type { JudgingBeside } from './threads/judging-beside.ts';

export { FIT_DEFAULTS, type FitInput, type FitOptions } from './fit-options.ts';

/** What the learning settled on. */
export interface Chosen {
  readonly kind: Model['kind'];
  /** For people: what the model is made of. */
  readonly name: string;
  /** Length of the predictive state. */
  readonly order: number;
  /** Every kind tried, with its error on the calibration part. */
  readonly tried: readonly Tried[];
  /** Ridge penalty of each signal's own stage, relative to features of unit variance; null: that stage did not pay. */
  readonly ownPenalty: readonly (number | null)[];
  /** Ridge penalty of the stage across signals, by signal; null: that stage did not pay. */
  readonly crossPenalty: readonly (number | null)[];
  /** Name of the feature bank, and what it holds. */
  readonly bank: string;
  readonly featureCount: number;
  readonly periodTicks: number;
  readonly folds: number;
}

/** A judged candidate and all that a report needs. */
export interface FitResult {
  /** The bundle document, ready to be written as a candidate. */
  readonly document: Uint8Array;
  readonly bundle: Bundle;
  /** The model as the gateway will compute it, read back from the document. */
  readonly model: Model;
  readonly learn: TickSpan;
  /** Time before it that was learned from as well, and the ticks taken in there; null: none. */
  readonly earlier: (TickSpan & { readonly ticks: number }) | null;
  readonly calibrate: TickSpan;
  readonly judged: TickSpan;
  /** The rounded model on the judged part. */
  readonly hindcast: Hindcast;
  readonly audit: Audit;
  /** Bounds, guard and crossing as first set. */
  readonly calibration: Calibration;
  readonly verdicts: Verdicts;
  readonly chosen: Chosen;
  /** What losing each channel costs; null where there is too little judged time, or too many channels. */
  readonly reliance: Reliance | null;
  /** What plans of inputs are worth on the judged part; null where there are none, or they change nothing. */
  readonly planWorth: PlanWorth | null;
  readonly warnings: readonly string[];
  /** Wall time of the steps in ms, for the terminal; not in the document. */
  readonly timings: Readonly<Record<string, number>>;
}

/** Characters of the provenance kept free for what a kind settles on. */
const SETTLED_ROOM = 160;
/** What sealing adds at most: the envelope's head and four signatures. */
const SIGNED_BYTES = 56 + MAX_SIGNATURES * 72;
/** Step of the gateway's quantile tracker; measured to hold weekly coverage on real records. */
const BOUNDS_RATE = 0.05;
/** Said where learning once more from everything failed. */
const NOT_FROM_ALL = 'From all ticks no model of this size could be solved for, so the one judged goes out as it is.';
/** Rivals a hindcast has at most; their names and skills take bytes. */
const MOST_RIVALS = 6;

/**
 * Fits a site's history; with a thread for judging `beside`, which is for long ones, sooner and to the same bytes.
 *
 * throws  TrainError 'options' or 'history' where the person can mend it, 'fit' where the numbers do not allow a model
 */
export async function fit(
  given: FitInput,
  options: FitOptions,
  beside: JudgingBeside | null = null,
): Promise<FitResult> {
  checkOptions(options);
  const clock = startClock(options.progress);
  const split = splitHistory(given.series, given.site, options);
  clock.lap('cleaning the history');
  const hasEarlier = given.earlierToCome !== undefined || (given.earlier ?? null) !== null;
  const cleaned = prepareHistory(given.series, given.site, given.lattices, split, hasEarlier);
  const input = { ...given, earlier: await (given.earlierToCome ?? given.earlier ?? null) };
  const prepared = { ...cleaned, earlier: input.earlier };
  clock.lap('learning');
  const taught = teach(prepared);
  clock.lap('choosing the kind and size, and calibrating');
  await beside?.begin();
  const small = await shrink(input, options, split, prepared, taught, beside);
  clock.lap('judging');
  const judged = indices(split.judged, input.series);
  // Where few origins are judged, rounding is held against all of them, once they are there.
  const isLong = scoreEvery(judged.toTick - judged.fromTick) > 1;
  const checks = isLong ? beside?.check(small.bundle, small.float, input.series, judged) : undefined;
  const units = [...input.site.signals, ...input.site.inputs].map((signal) => signal.unit);
  const cast = hindcast(
    modelFromBundle(small.bundle),
    input.series,
    { ...split.judged, learn: split.learn, limits: siteLimits(input.site) },
    units,
  );
  const verdicts = judge(cast);
  const model = modelFromBundle(small.bundle);
  const audit = (await checks)?.audit ?? auditRounding(model, small.float, input.series, judged, cast.mseStandardised);
  clock.lap('finding what plans are worth');
  const worth = planWorth(model, input.series, judged, small.plans.planned);
  clock.lap('finding what the forecasts rest on');
  const rest = checks === undefined ? reliance(model, input.series, judged) : (await checks).reliance;
  clock.lap('writing the candidate');
  const parts = { ...small.parts, ...small.all };
  const document = encodeBundle(composeBundle({ ...parts, judge: judgeTable(cast, verdicts, options.override) }));
  const bundle = decodeBundle(document);
  return Object.freeze({
    document,
    bundle,
    model: modelFromBundle(bundle),
    ...split,
    earlier: earlierSpan(input.earlier ?? null),
    hindcast: cast,
    audit,
    calibration: small.parts.calibration,
    verdicts,
    chosen: chosenOf(small.choice, prepared, taught),
    reliance: rest,
    planWorth: worth,
    warnings: [
      ...prepared.warnings,
      ...taught.warnings,
      ...small.plans.warnings,
      ...(options.useAll && small.all === null ? [NOT_FROM_ALL] : []),
    ],
    timings: clock.laps(),
  });
}

/** The chosen candidate, calibrated. */
interface Small {
  readonly choice: KindChoice;
  readonly bundle: Bundle;
  readonly parts: Composition;
  readonly plans: Plans;
  /** The same model without rounding, with the same calibration. */
  readonly float: Model;
  /** What replaces the parts where it was learned once more from everything; null: they stay. */
  readonly all: LearnedAgain | null;
}

type LearnedAgain = Pick<Composition, 'around' | 'sections' | 'response' | 'learnedToTick'>;

async function shrink(
  input: FitInput,
  options: FitOptions,
  split: Split,
  prepared: Prepared,
  taught: Taught,
  beside: JudgingBeside | null,
): Promise<Small> {
  const around: Surroundings = {
    ...prepared.around,
    bank: taught.choice.bank,
    round: taught.round,
    warmupTicks: prepared.around.warmupTicks + (taught.round?.ticks ?? 0),
    coverage: options.coverage,
    boundsRate: BOUNDS_RATE,
  };
  const names = input.series.names.slice(0, around.signalCount);
  const partsOf = (sections: KindSections, settled: Readonly<Record<string, unknown>>): Composition => ({
    input,
    options,
    around,
    sections,
    calibration: {
      ...openCalibration(around.scalings.length, around.signalCount * around.horizon, around.signalCount),
      stuck: { ...prepared.stuck, acts: true },
    },
    judge: placeholderJudge(names, verdictSteps(around.horizon), MOST_RIVALS, options.override),
    learnedToTick: split.learn.toTick,
    settled: settledOf(split, input.earlier ?? null, settled),
  });
  const planned = plannedInputs(input.site);
  const room = responseRoom(around.signalCount, planned.length, around.horizon, featureCount(around.bank));
  const limit = options.maxBytes - SIGNED_BYTES - room;
  const bytesLeft = (sections: KindSections): number =>
    limit - documentBytes(partsOf(sections, { room: ' '.repeat(SETTLED_ROOM) }));
  const { series, site } = input;
  const span = indices(split.calibrate, series);
  const wanted = { coverage: options.coverage, limits: siteLimits(site), stuck: prepared.stuck };
  const begun = new Map<Candidate, () => Promise<Calibration>>();
  const attempt = { series, site, options, split, prepared, taught, around, bytesLeft };
  const choice = chooseKind(attempt, (first) => {
    if (beside !== null) begun.set(first, beside.settle(first.rounded, prepared.calm, span, wanted));
  });
  const { candidate } = choice;
  const plans = learnPlans(candidate, prepared, split.calibrate.toTick - series.firstTick, planned);
  // While the bounds may still be worked out beside.
  const all = options.useAll ? learnFromAll(input, prepared, around, candidate, plans) : null;
  const calibration = await (begun.get(candidate)?.() ?? settle(candidate.rounded, prepared.calm, span, wanted));
  const parts = { ...partsOf(candidate.sections, candidate.settled), calibration, response: plans.response?.tensors };
  const bundle = composeBundle(parts);
  return { choice, bundle, parts, plans, float: withCalibration(candidate.float, calibration), all };
}

function siteLimits(site: FitInput['site']): AskedLimit[] {
  return declaredLimits(site.signals.map((signal) => signal.limits));
}

/**
 * Learns once more from every tick, at the size and penalties already judged; bounds stay as calibrated. Null where the
 * numbers of all ticks allow no model: what was judged is still good.
 */
function learnFromAll(
  { series, site }: FitInput,
  prepared: Prepared,
  around: Surroundings,
  candidate: Candidate,
  plans: Plans,
): LearnedAgain | null {
  try {
    const again = candidate.again(series.ticks);
    const { response } = learnPlans(again, prepared, series.ticks, plans.response === null ? [] : plans.planned);
    const learnedToTick = series.firstTick + series.ticks;
    const scaled = { ...around, scalings: scalingsForAll(prepared, site) };
    return { around: scaled, sections: again.sections, response: response?.tensors, learnedToTick };
  } catch (error) {
    if (error instanceof TrainError && error.code === 'fit') return null;
    throw error;
  }
}

/** Goes into the provenance: what `hindcast` needs to know of the split, and what was chosen. */
function settledOf(
  split: Split,
  earlier: Earlier | null,
  settled: Readonly<Record<string, unknown>>,
): Readonly<Record<string, unknown>> {
  const span = ({ fromTick, toTick }: TickSpan): readonly number[] => [fromTick, toTick];
  const before =
    earlier === null
      ? {}
      : { earlier: span(earlier), earlierDigest: Buffer.from(earlier.digest.subarray(0, 8)).toString('hex') };
  return {
    ...before,
    learn: span(split.learn),
    calibrate: span(split.calibrate),
    judged: span(split.judged),
    ...settled,
  };
}

function chosenOf({ candidate, tried }: KindChoice, { around }: Prepared, { choice }: Taught): Chosen {
  return {
    kind: candidate.kind,
    name: candidate.name,
    order: candidate.rounded.order,
    tried,
    ownPenalty: choice.ownPenalty,
    crossPenalty: choice.crossPenalty,
    bank: bankName(choice.bank),
    featureCount: featureCount(choice.bank),
    periodTicks: around.season.periodTicks,
    folds: choice.folds,
  };
}

function earlierSpan(earlier: Earlier | null): FitResult['earlier'] {
  return earlier && { fromTick: earlier.fromTick, toTick: earlier.toTick, ticks: earlier.ticks };
}

function indices(span: TickSpan, series: Series): TickSpan {
  return { fromTick: span.fromTick - series.firstTick, toTick: span.toTick - series.firstTick };
}

/** Names each step as it begins and remembers how long it took. */
function startClock(progress: (step: string) => void): { lap(step: string): void; laps(): Record<string, number> } {
  const laps: Record<string, number> = {};
  let current: string | null = null;
  let startedMs = 0;
  const close = (): void => {
    if (current !== null) laps[current] = performance.now() - startedMs;
  };
  return {
    lap(step) {
      close();
      current = step;
      startedMs = performance.now();
      progress(step);
    },
    laps() {
      close();
      return laps;
    },
  };
}
