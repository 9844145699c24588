/**
 * The gateway's inside, without a broker: readings are laid on ticks, ticks go through the journal and the serving
 * bundle's filter, surprises into segments. The same readings give the same ticks, forecasts and segments, whether it ran
 * through or was stopped and started in between.
 */
import type { Site } from '@stillwell/protocol';
import type { BundleKeeper } from './bundle/change.ts';
import { Takeover } from './divergence/takeover.ts';
import { rebuilt } from './divergence/warmed.ts';
import { Counters, type RefusedCause } from './health.ts';
import { type Aligner, alignerOf, type LateChange, type OpenReadings } from './ingest/align.ts';
import { BirthFile } from './ingest/births.ts';
import type { ReadingDecoder } from './ingest/decode.ts';
import type { HeldReadings } from './ingest/held.ts';
import { ReadingIntake } from './ingest/intake.ts';
import { PlanKeeper, type PlanOutcome } from './ingest/plans.ts';
import { RecentTicks } from './ingest/recent.ts';
import { budgetOf, type ResolutionBudget } from './residuals/budget.ts';
import { Journal, type JournalPosition } from './residuals/journal.ts';
import { PlainRecord } from './residuals/plain-record.ts';
import type { Recorded } from './residuals/recorded.ts';
import { type Identity, type Recovered, replaceIdentity } from './residuals/recover.ts';
import { alignFrame, openRecord, type RecordOptions, type RecordStart } from './residuals/resume.ts';
import { Spool } from './residuals/spool.ts';
import { eachReading, type WalRecord } from './residuals/wal.ts';
import { type CheckedBundle, Serving } from './serving.ts';
import { SignalWatch } from './signals/watch.ts';

/** What an engine is made of. */
export interface EngineOptions extends RecordOptions {
  readonly segmentTicks: number;
}

/** Ticks kept to warm a new bundle with. */
const RECENT_TICKS = 8192;
/** An outage of more ticks than this is not bridged: the filter starts afresh behind it. */
const MAX_GAP_TICKS = 50_000;

/** See the file head. */
export class Engine {
  readonly counters = new Counters();
  readonly plans: PlanKeeper;
  readonly watch: SignalWatch;
  readonly takeover: Takeover;
  readonly aligner: Aligner;
  readonly spool: Spool;
  readonly budget: ResolutionBudget;
  identity: Identity;
  readonly #options: EngineOptions;
  /** Null at sites without Sparkplug. */
  readonly #births: BirthFile | null;
  /** Readings of the latest ticks. */
  recent: RecentTicks;
  readonly #channelCount: number;
  readonly #intake: ReadingIntake;
  readonly #onChange = (change: LateChange): void => this.#correct(change, true);
  #serving: Serving | null = null;
  /** Speaks in the place of a filter while none is fit to; the record is then the plain one. */
  #held: Serving | null = null;
  /** What the record is coded against while no bundle serves. */
  #plain: PlainRecord;
  #journal: Journal;

  /** Opens the data folder and goes on where it stopped. throws  RuntimeError 'data-folder' */
  constructor(options: EngineOptions, keeper: BundleKeeper) {
    const { site, disk, folder, note } = options;
    const channels = [...site.signals, ...site.inputs];
    this.#options = options;
    this.#intake = new ReadingIntake(site, {
      refuse: (channel, cause) => this.#refuse(channel, cause),
      place: (channel, value, timeMs, notAfterMs) => this.#place(channel, value, timeMs, notAfterMs),
    });
    this.plans = new PlanKeeper(site);
    this.watch = new SignalWatch(channels.length);
    this.#channelCount = channels.length;
    this.aligner = alignerOf(site);
    this.recent = new RecentTicks(channels.length, RECENT_TICKS);
    this.takeover = new Takeover({ keeper, disk, folder, recent: this.recent, plans: this.plans, note });
    const start = openRecord(options, keeper);
    this.identity = start.identity;
    this.spool = new Spool(disk, `${folder}/spool`, options.spoolBytes, this.streamName);
    this.budget = budgetOf(site, options.spoolBytes);
    const budget = start.from?.recovered.checkpoint.budget ?? null;
    if (budget !== null) this.budget.restore(budget);
    this.#plain = PlainRecord.of(site);
    this.#journal = this.#openJournal(start.from?.recovered.checkpoint ?? { number: 0, sinceKeyed: 0 });
    this.#start(keeper, start);
    const { sparkplug } = this.decoder;
    this.#births = sparkplug === null ? null : new BirthFile(disk, folder, sparkplug, this.aligner.newestMs);
  }

  get streamName(): string {
    return Buffer.from(this.identity.stream).toString('hex');
  }

  get site(): Site {
    return this.#options.site;
  }

  get serving(): Serving | null {
    return this.#serving ?? this.#held;
  }

  get journal(): Journal {
    return this.#journal;
  }

  get #recorded(): Recorded {
    return this.#serving ?? this.#plain;
  }

  get decoder(): ReadingDecoder {
    return this.#intake.decoder;
  }

  /** Readings that wait for a clock. */
  get held(): HeldReadings {
    return this.#intake.held;
  }

  /** Takes one MQTT message in, as the intake does. */
  message(topic: string, payload: Uint8Array, arrivalMs: number, notAfterMs: number | null): void {
    this.#intake.message(topic, payload, arrivalMs, notAfterMs);
  }

  /** Takes those in that waited. wallMs  of an arrival on the monotonic clock */
  clockIsSet(wallMs: (atMs: number) => number): void {
    if (this.held.count === 0) return;
    this.#options.note('info', `the clock is set: ${this.held.count} readings get their times`);
    this.#intake.clockIsSet(wallMs);
  }

  /**
   * Takes one MQTT message in that may be a plan, and says what became of it; forecasts then stand under it at once.
   *
   * nowMs  null where the time is not known
   */
  plan(topic: string, payload: Uint8Array, nowMs: number | null): PlanOutcome[] {
    const outcomes = this.plans.take(topic, payload, nowMs);
    if (outcomes.some(({ kind }) => kind === 'taken' || kind === 'withdrawn')) this.#serving?.replan();
    return outcomes;
  }

  /**
   * Closes the ticks that are due, each folded into the filter, and returns how many.
   *
   * nowMs  the wall clock, or null: event time alone
   */
  close(nowMs: number | null): number {
    const due = this.aligner.due(nowMs);
    if (due > MAX_GAP_TICKS) this.#jump(due);
    return this.aligner.close(
      nowMs,
      ({ tick, values }) => this.#fold(tick, values, true),
      (tick) => this.#beforeTick(tick),
    );
  }

  /** Leaves out the ticks that a clock's step ahead passed over, if more than `most`: no time passed in them. */
  passOver(nowMs: number, most: number): void {
    const due = this.aligner.due(nowMs);
    if (due > most) this.#jump(due);
  }

  /** Goes on at `tick`, which may lie before what was closed: a new stream of segments, a filter that starts afresh. */
  renewAt(tick: number): void {
    const { disk, folder } = this.#options;
    const counts = this.#journal.leave(this.#recorded);
    this.identity = replaceIdentity(disk, folder, this.identity);
    this.aligner.renewAt(tick);
    this.recent = new RecentTicks(this.#channelCount, RECENT_TICKS);
    this.#plain = PlainRecord.of(this.site);
    if (this.#serving !== null) this.#serving = this.#serving.afresh();
    this.#journal = this.#openJournal({ number: 0, sinceKeyed: 0 }, counts);
    this.#journal.begin(this.#recorded);
  }

  /** Hands the record to the disk, and closes the open segment if it is due. Call when forecasts are out. */
  settle(retry = false): void {
    if (retry) this.#births?.save();
    const journal = this.#journal;
    if (retry && journal.fault !== null) this.#turnOver();
    this.#turnIfDue();
    journal.flush();
  }

  /** Puts a bundle to work: warmed on the recent ticks, changed at the present tick boundary; false where it fails on them. */
  install(checked: CheckedBundle): boolean {
    const after = this.takeover.installed(checked, this.aligner.nextTick);
    if (after !== null) this.#put(this.#recorded, after);
    return after !== null;
  }

  /** The same document under a higher sequence. */
  restamp(checked: CheckedBundle): void {
    if (this.serving !== null) this.serving.checked = checked;
  }

  /** Leaves everything on disk. */
  stop(): void {
    this.#births?.save();
    this.settle();
    this.#journal.stop();
  }

  #start(keeper: BundleKeeper, { from, left, nextTick }: RecordStart): void {
    if (from === null) this.#begin(left, nextTick);
    else {
      this.spool.discardFrom(this.streamName, from.recovered.checkpoint.number);
      this.#resume(from.recovered, from.recorded);
      if (this.#serving !== null) keeper.serves(this.#serving.checked);
    }
    const first = (checked: CheckedBundle): void => {
      if (this.install(checked)) keeper.serves(checked);
    };
    const { fit, ladder } = this.takeover;
    for (const checked of fit) if (this.#recorded === this.#plain && this.#held === null) first(checked);
    const best = keeper.best();
    if (this.serving === null && best !== null) {
      ladder.begin(this.aligner.nextTick ?? 0, 'every bundle in the data folder failed on what was read here');
      this.#held = Serving.holding(best);
    }
    const newer = this.#serving === null ? null : keeper.interrupted(this.#serving.checked);
    if (newer !== null && !this.takeover.isCondemned(newer)) first(newer);
  }

  #begin(left: RecordStart['left'], nextTick: number | null): void {
    if (nextTick !== null) this.aligner.startAt(nextTick);
    for (const { channel, timeMs, value } of left) this.aligner.replay(channel, timeMs, value);
    this.#journal.begin(this.#plain);
  }

  #resume(recovered: Recovered, recorded: Serving | PlainRecord): void {
    const { checkpoint, records, validBytes, tornBytes, kept, earlier } = recovered;
    if (tornBytes > 0) this.#options.note('warn', `journal: ${tornBytes} torn bytes cut off`);
    for (const record of earlier) {
      if (record.kind === 'tick') this.recent.push(record.tick, record.values);
      alignFrame(this.aligner, record);
    }
    if (recorded.tick >= 0 && this.aligner.nextTick !== recorded.tick + 1) this.aligner.startAt(recorded.tick + 1);
    recorded.coarsen(this.budget.coarseness);
    if (recorded instanceof Serving) {
      recorded.plans = this.plans;
      this.#serving = recorded;
    } else this.#plain = recorded;
    this.#journal.resume(checkpoint.state, validBytes, kept);
    for (const record of records) this.#replay(record, checkpoint.number);
    if (this.#serving === null) this.#changePlain(this.#plain.declared(this.site));
    this.counters.ticks = 0;
    this.counters.corrections = 0;
  }

  /** Takes one frame in again of the journal file that the checkpoint names. */
  #replay(record: WalRecord, from: number): void {
    if (record.kind === 'tick') this.#beforeTick(record.tick);
    alignFrame(this.aligner, record);
    // Where a shorter segment length closed the segment on the way, the rest belongs into the next journal file.
    const isNew = this.#journal.number !== from;
    if (record.kind === 'tick') this.#fold(record.tick, record.values, isNew);
    else if (record.kind === 'change') this.#correct(record, isNew);
    else if (record.kind === 'readings' && isNew)
      eachReading(record, (channel, timeMs, value) => this.#journal.reading(channel, timeMs, value));
  }

  #openJournal(position: JournalPosition, counts?: Journal['counts']): Journal {
    const { disk, folder, gateway, site, segmentTicks } = this.#options;
    const { spool, budget } = this;
    const [channelCount, { stream }] = [this.#channelCount, this.identity];
    const where = { disk, folder, site: site.site, gateway, stream, spool, budget, segmentTicks, channelCount };
    const openReadings = (): OpenReadings => this.aligner.openReadings();
    return new Journal({ ...where, keepTicks: RECENT_TICKS, openReadings }, position, counts);
  }

  /** after  null: the plain record goes on, and readings are held */
  #put(before: Recorded, after: Serving | null): void {
    if (after === null && this.#serving !== null) this.#held = Serving.holding(this.#serving.checked);
    if (after !== null) this.#held = null;
    const plain = after ?? this.#plain.afresh();
    this.#journal.turnOver(before, plain);
    this.#serving = after;
    if (plain instanceof PlainRecord) {
      this.#plain = plain;
      plain.beginSegment();
    }
  }

  #place(channel: number, value: number, timeMs: number, notAfterMs: number | null): void {
    const placed = this.aligner.place(channel, timeMs, value, notAfterMs, this.#onChange);
    if (placed === 'duplicate') this.counters.duplicates++;
    else if (placed === 'future' || placed === 'too-late' || placed === 'flood') this.#refuse(channel, placed);
    else {
      this.counters.readings++;
      if (placed !== 'taken') this.counters.late++;
      this.#journal.reading(channel, timeMs, value);
    }
  }

  #refuse(channel: number, cause: RefusedCause): void {
    this.counters.refuse(cause);
    this.watch.refused[channel]!++;
  }

  /** At a tick boundary, when the aligner knows of the tick ahead only as open. */
  #turnIfDue(): void {
    if (this.#journal.isDue || (this.#serving === null && this.#plain.isRefinable)) this.#turnOver();
  }

  #turnOver(): void {
    if (this.#serving === null) this.#turnPlain(this.#plain.refined());
    else this.#journal.turnOver(this.#serving, this.#serving);
  }

  /** The same, and what the first tick of a segment says of the steps of sensors. */
  #beforeTick(tick: number): void {
    this.#turnIfDue();
    if (this.#serving === null && this.#journal.ticks === 0)
      this.#changePlain(this.#plain.begun((channel) => this.aligner.readingsOf(tick, channel)));
  }

  #changePlain(after: PlainRecord): void {
    if (after !== this.#plain) this.#turnPlain(after);
  }

  #turnPlain(after: PlainRecord): void {
    this.#journal.turnOver(this.#plain, after);
    this.#plain = after;
    after.beginSegment();
  }

  /** toDisk  false for what the open journal file holds already */
  #fold(tick: number, values: Float64Array, toDisk: boolean): void {
    this.recent.push(tick, values);
    this.plans.came(tick, values);
    this.counters.ticks++;
    const isNew = this.#step(tick, values);
    if (toDisk || isNew) this.#journal.tick(tick, values);
    this.#journal.coded(this.#recorded);
    this.#held?.hold(tick, values);
    this.#watch(tick);
  }

  /**
   * By the filter; where it fails, the segment ends before this tick, which goes to what takes over. Whether it does, and so
   * belongs into another journal file than it may stand in already.
   */
  #step(tick: number, values: Float64Array): boolean {
    const serving = this.#serving;
    if (serving === null) {
      this.#plain.step(tick, values, (channel) => this.aligner.readingsOf(tick, channel));
      return false;
    }
    if (this.takeover.stepped(serving, tick, values)) return false;
    const before = rebuilt(serving, this.#journal, this.recent, tick) ?? serving;
    this.#put(before, this.takeover.afterFailure(serving, tick));
    this.#step(tick, values);
    return true;
  }

  /** Looks at what the filter made of a tick, and changes it at the boundary behind where it must be. */
  #watch(tick: number): void {
    const [serving, held] = [this.#serving, this.#held];
    if (serving !== null) {
      this.watch.observe(serving);
      const action = this.takeover.ladder.observe(serving);
      if (action !== null) this.#put(serving, this.takeover.after(serving, action, tick + 1));
    } else if (held !== null) {
      const after = this.takeover.retried(held, tick);
      if (after !== null) this.#put(this.#plain, after);
    }
  }

  #correct(change: LateChange, toDisk: boolean): void {
    const { tick, channel, value } = change;
    this.counters.corrections++;
    if (this.#serving === null)
      this.#changePlain(this.#plain.reaching(channel, this.aligner.readingsOf(tick, channel) ?? [value]));
    const index = this.#recorded.indexOf(channel, value);
    if (toDisk) this.#journal.change(change, index, this.#recorded);
    else this.#journal.changed(change, index, this.#recorded);
  }

  /** Past an outage too long to bridge tick by tick: go on just before now, with a filter that starts afresh. */
  #jump(due: number): void {
    const isStart = this.aligner.nextTick === null;
    this.aligner.skip(due - 1);
    if (isStart)
      this.#options.note('warn', `a reading ${due} ticks old came first: too old to start from, passed over`);
    else {
      this.counters.skippedTicks += due - 1;
      this.#options.note('warn', `outage of ${due} ticks: too long to bridge, the filter starts afresh`);
    }
    if (this.#serving === null) {
      this.#turnPlain(this.#plain.afresh());
      return;
    }
    const after = this.#serving.afresh();
    this.#journal.turnOver(this.#serving, after);
    this.#serving = after;
  }
}
