/**
 * The gateway: engine, broker, slots and spool wired together. One thread, one loop: messages come in, ticks close,
 * forecasts go out, then the disk is tended. Nothing that comes from outside can throw out of here.
 */
import { type HealthStatus, topicsOf } from '@stillwell/protocol';
import { logBrokerLine, openBrokerLine, TakeOvers } from './broker-line.ts';
import { BundleKeeper } from './bundle/change.ts';
import { BundleIntake } from './bundle/intake.ts';
import { ClockWatch } from './clock-watch.ts';
import type { GatewayConfig } from './config.ts';
import { Engine } from './engine.ts';
import type { Connection, ConnectionEvent, IncomingPacket } from './mqtt/connection.ts';
import { dispatch, filtersOf } from './mqtt/subscriptions.ts';
import type { GatewayPorts } from './ports.ts';
import { Publisher } from './publish/publisher.ts';
import { type QuestionPorts, Questions } from './questions/questions.ts';
import { GroupSync } from './residuals/group-sync.ts';
import { takeReceipt } from './residuals/receipts.ts';
import { Shipper } from './residuals/ship.ts';
import { CLOCK_UNSET_MS, SteadyClock } from './steady-clock.ts';
import type { Watcher } from './watcher.ts';

/** The loop comes round at least so often, for whatever is due. */
const PULSE_MS = 500;
/** What nobody waits for, readings of QoS 0 and closed ticks, is synced so often. */
const SYNC_MS = 1000;
/** A bundle left in the data folder is looked for so often. */
const LOOK_MS = 1000;
const RETRY_DISK_MS = 30_000;
/** How long a start waits for the broker's kept messages before the wall clock may close ticks. */
const SETTLE_MS = 1000;
const SETTLE_AT_MOST_MS = 10_000;
const CATCHING_UP_TICKS = 3;
/** For a message that must come again. */
const NEVER = new Promise<void>(() => {});

/** A running gateway; see the file head. */
export class Gateway {
  readonly engine: Engine;
  /** Told of ticks, pulses and the line. */
  watcher: Watcher | null = null;
  readonly config: GatewayConfig;
  readonly #ports: GatewayPorts;
  readonly #clockWatch: ClockWatch;
  readonly #intake: BundleIntake;
  readonly #topics: ReturnType<typeof topicsOf>;
  readonly #shipper: Shipper;
  readonly #groupSync: GroupSync;
  readonly #connection: Connection;
  readonly publisher: Publisher;
  readonly #questions: Questions;
  #status: HealthStatus = 'starting';
  #cancelPulse: () => void = () => {};
  #isPublishDue = false;
  #holdUntil: number;
  #lookedAt = 0;
  #retriedAt = 0;
  #saidFault: string | null = null;
  readonly #takeOvers = new TakeOvers();
  #isStopping = false;
  #pulseDueMs = Number.NaN;

  /** Opens the data folder and starts. throws  RuntimeError 'data-folder' */
  constructor(config: GatewayConfig, ports: GatewayPorts) {
    const { site, gateway, data, segmentTicks, spoolBytes } = config;
    const { disk, log } = ports;
    const clock = new SteadyClock(ports.clock);
    this.config = config;
    this.#ports = { ...ports, clock };
    this.#topics = topicsOf(site.root, site.site);
    const keeper = new BundleKeeper(disk, data, site, config.trusted);
    for (const fault of keeper.faults) log.warn(`bundle on disk not usable: ${fault}`);
    this.engine = new Engine(
      {
        site,
        gateway,
        disk,
        folder: data,
        segmentTicks,
        spoolBytes,
        ...(ports.stream ? { stream: ports.stream } : {}),
        note: (level, text) => log[level](text),
      },
      keeper,
    );
    this.#clockWatch = new ClockWatch(clock, this.engine, site.tickMs, (text) => log.warn(text));
    this.#intake = new BundleIntake({
      keeper,
      engine: this.engine,
      ports: this.#ports,
      folder: data,
      onChange: () => this.#onBundleChange(),
    });
    this.#holdUntil = clock.monotonic() + SETTLE_AT_MOST_MS;
    this.#groupSync = new GroupSync({ clock, sync: async () => this.engine.journal.syncSoon() });
    this.#connection = this.#connect();
    this.publisher = new Publisher(config, this.#ports, this.#connection, this.#topics);
    this.#questions = this.#openQuestions();
    this.#shipper = new Shipper({
      spool: this.engine.spool,
      clock,
      window: () => this.#connection.window,
      send: (segment) =>
        this.#connection.publish({ topic: this.#topics.segments, payload: segment, qos: 1, retain: false }),
    });
    this.#release();
    this.#setStatus();
    void this.#connection
      .subscribe(filtersOf(this.#topics, [...this.engine.plans.filters, ...this.engine.decoder.filters]))
      .catch(() => {});
    this.#pulse();
  }

  get status(): HealthStatus {
    return this.#status;
  }

  get isConnected(): boolean {
    return this.#connection.isConnected;
  }

  /** The health message as it would be published now. */
  healthNow(): Uint8Array {
    return this.publisher.healthNow(this.#report());
  }

  /** The forecast messages of the last tick, by signal; none before the first. */
  forecastsNow(): readonly Uint8Array[] {
    const present = this.#present();
    if (present === null) return [];
    return this.publisher.forecastsNow(present.serving, present.occasion, this.engine.aligner.lastReadingMs);
  }

  /** Checks a sealed bundle and, if it holds, puts it to work at this tick boundary; the outcome as one sentence. */
  offerBundle(sealed: Uint8Array, from: string): string {
    return this.#intake.offer(sealed, from);
  }

  /** Flushes, syncs, says 'stopped' and leaves. Takes no more than two seconds. */
  async stop(): Promise<void> {
    if (this.#isStopping) return;
    this.#isStopping = true;
    this.#cancelPulse();
    this.engine.stop();
    this.#groupSync.release();
    this.#status = 'stopped';
    await this.publisher.health(this.#report());
    await this.#connection.end();
  }

  /** Cuts the line without a word, as a crash would; for tests of what then happens. */
  async abandon(): Promise<void> {
    this.#isStopping = true;
    this.#cancelPulse();
    await this.#connection.end(true);
  }

  #connect(): Connection {
    const will = Publisher.will(this.config, this.#ports, this.#topics.health);
    return openBrokerLine(this.config, this.#ports, will, {
      onMessage: (topic, payload, packet) => this.#take(topic, payload, packet),
      onState: (event) => this.#guard(() => this.#onConnection(event)),
    });
  }

  #openQuestions(): Questions {
    const { site, gateway } = this.config;
    const { clock, log } = this.#ports;
    return new Questions({
      site,
      gateway,
      topics: this.#topics,
      log,
      monotonic: () => clock.monotonic(),
      present: () => this.#present(),
      nowMs: () => this.nowMs(),
      publish: (message) => this.#connection.publish(message),
    });
  }

  #onBundleChange(): void {
    this.#release();
    this.#setStatus();
    this.#sayHealth();
  }

  #onConnection(event: ConnectionEvent): void {
    logBrokerLine(this.#ports.log, event);
    this.#takeOvers.take(event);
    this.watcher?.line(event);
    if (event.kind === 'connected') {
      this.#holdUntil = Math.min(this.#holdUntil, this.#ports.clock.monotonic() + SETTLE_MS);
      this.#shipper.connected();
      this.publisher.connected();
      this.#sayHealth();
    } else if (event.kind === 'lost') {
      this.#shipper.lost();
      this.publisher.reconnects++;
    } else if (event.kind === 'taken-over') this.#sayHealth();
  }

  /** The promise, if any, resolves when a message of QoS 1 may be acknowledged. */
  #take(topic: string, payload: Uint8Array, packet: IncomingPacket): Promise<void> | void {
    if (this.#isStopping) return NEVER;
    try {
      dispatch(
        this.#topics,
        {
          bundle: (sealed) => void this.#intake.offer(sealed, 'from the broker'),
          question: (bytes) => this.#questions.take(bytes, packet),
          receipt: (bytes) => takeReceipt(bytes, this.config.gateway, this.#shipper, this.#ports.log),
          reading: (from, bytes) => {
            this.#plan(from, bytes);
            this.#reading(from, bytes);
          },
        },
        topic,
        payload,
      );
    } catch (error) {
      this.#ports.log.error(`message on ${topic} not handled: ${(error as Error).message}`);
    }
    if (packet.qos > 0 && !this.engine.journal.isDurable) return this.#groupSync.wait();
  }

  #reading(topic: string, payload: Uint8Array): void {
    const { site } = this.config;
    const wall = this.#ports.clock.wall();
    const isSet = wall >= CLOCK_UNSET_MS;
    const notAfterMs = this.config.clock === 'wall' ? wall + site.latenessMs + site.tickMs : null;
    this.engine.held.nowMs = this.#ports.clock.monotonic();
    this.engine.message(topic, payload, isSet ? wall : Number.NaN, isSet ? notAfterMs : null);
    if (this.config.clock === 'readings' || !isSet) this.#closeTicks();
  }

  /** A message of a plan topic; any other passes without a trace. */
  #plan(topic: string, payload: Uint8Array): void {
    const { log } = this.#ports;
    const outcomes = this.engine.plan(topic, payload, this.nowMs());
    for (const { input, kind, cause, text } of outcomes) {
      if (kind === 'refused') log.warn(`plan of ${input} refused (${cause}): ${text}`);
      else if (kind !== 'known') log.info(`plan of ${input} ${kind === 'taken' ? 'taken' : 'taken back'}`);
    }
    if (outcomes.some(({ kind }) => kind === 'taken' || kind === 'withdrawn')) this.#publishSoon();
  }

  /** The wall clock, or the newest reading's time where only that can be believed; null: neither. */
  nowMs(): number | null {
    const wall = this.#ports.clock.wall();
    if (this.config.clock === 'wall' && wall >= CLOCK_UNSET_MS) return wall;
    const { newestMs } = this.engine.aligner;
    return Number.isFinite(newestMs) ? newestMs : null;
  }

  /** The loop: what is due now, then sleep until the next tick closes. */
  #pulse(): void {
    const { clock } = this.#ports;
    this.#watchClock();
    const now = clock.monotonic();
    if (!Number.isNaN(this.#pulseDueMs)) this.watcher?.pulse(now - this.#pulseDueMs);
    this.#closeTicks();
    if (this.engine.journal.isDirty && this.#groupSync.ageMs >= SYNC_MS) this.#groupSync.now();
    if (now - this.#lookedAt >= LOOK_MS) {
      this.#lookedAt = now;
      this.#intake.takeIncoming();
    }
    const isRetry = now - this.#retriedAt >= RETRY_DISK_MS;
    if (isRetry) this.#retriedAt = now;
    this.#tend(isRetry);
    this.#shipper.poke();
    if (this.publisher.isHealthDue()) this.#sayHealth();
    const waitMs = this.#untilNextMs();
    this.#pulseDueMs = clock.monotonic() + waitMs;
    this.#cancelPulse = clock.after(waitMs, () => this.#guard(() => this.#pulse()));
  }

  /** Before ticks close: a clock that stepped must neither close what was jumped nor leave us deaf. */
  #watchClock(): void {
    const { clock } = this.#ports;
    const wall = clock.wall();
    if (wall < CLOCK_UNSET_MS) return;
    const offset = wall - clock.monotonic();
    this.engine.clockIsSet((atMs) => atMs + offset);
    if (this.config.clock === 'wall' && this.#clockWatch.check()) this.#sayHealth();
  }

  #untilNextMs(): number {
    const { site, clock } = this.config;
    const next = this.engine.aligner.nextTick;
    if (clock === 'readings' || next === null) return PULSE_MS;
    const dueMs = (next + 1) * site.tickMs + site.latenessMs - this.#ports.clock.wall();
    return Math.min(PULSE_MS, Math.max(1, dueMs));
  }

  #closeTicks(): void {
    const { clock } = this.#ports;
    const wall = clock.wall();
    const byWall = this.config.clock === 'wall' && wall >= CLOCK_UNSET_MS;
    // Messages kept by the broker while we were away come before the ticks they belong to are closed as missing.
    if (byWall && clock.monotonic() < this.#holdUntil) return;
    const closed = this.engine.close(byWall ? wall : null);
    if (closed === 0) return;
    this.publisher.isCatchingUp = byWall && closed >= CATCHING_UP_TICKS;
    if (byWall) this.#publishTick();
    else this.#publishSoon();
  }

  /** Readings of many ticks, or plans of many inputs, often come in one go: forecasts of the last one are enough. */
  #publishSoon(): void {
    if (this.#isPublishDue) return;
    this.#isPublishDue = true;
    setImmediate(() => this.#guard(() => this.#publishTick()));
  }

  #publishTick(): void {
    this.#isPublishDue = false;
    if (this.#isStopping) return;
    const { serving, plans, aligner } = this.engine;
    const issuedAtMs = this.#issuedAtMs();
    let forecasts: readonly Uint8Array[] | null = null;
    if (serving !== null && serving.tick >= 0)
      forecasts = this.publisher.tick(serving, plans, aligner.lastReadingMs, issuedAtMs);
    else if (aligner.nextTick !== null) this.publisher.silent(aligner.nextTick - 1, issuedAtMs);
    this.#tend(false);
    const before = this.#status;
    this.#setStatus();
    if (before !== this.#status) this.#sayHealth();
    this.watcher?.tick(forecasts);
  }

  /** By the wall clock, or where that is not to be believed by the newest reading. */
  #issuedAtMs(): number {
    return this.nowMs() ?? this.engine.aligner.newestMs;
  }

  /** What questions are answered from. */
  #present(): ReturnType<QuestionPorts['present']> {
    const { serving, plans } = this.engine;
    if (serving === null || serving.tick < 0 || serving.isHolding) return null;
    return { serving, occasion: this.publisher.occasionOf(serving, plans, this.#issuedAtMs()) };
  }

  /** The disk's turn, once forecasts are out. */
  #tend(isRetry: boolean): void {
    this.engine.settle(isRetry);
    this.#release();
    const { fault } = this.engine.journal;
    if (fault === this.#saidFault) return;
    this.#saidFault = fault;
    if (fault === null) this.#ports.log.info('the disk takes data again');
    else this.#ports.log.error(`nothing is being kept on disk: ${fault}; forecasts go on`);
  }

  #release(): void {
    const { journal, streamName } = this.engine;
    if (journal.fault === null) this.#shipper.release(streamName, journal.number);
  }

  #setStatus(): void {
    const { serving } = this.engine;
    this.#status = serving === null ? 'no-bundle' : serving.isWarming && !serving.isHolding ? 'warming' : 'running';
  }

  #sayHealth(): void {
    if (!this.#isStopping) this.publisher.health(this.#report()).catch((error) => this.#fault(error));
  }

  /** Where nobody would catch what is thrown: several gateways in one process must not fall with one. */
  #guard(work: () => void): void {
    try {
      work();
    } catch (error) {
      this.#fault(error);
    }
  }

  #fault(error: unknown): void {
    const { onFault } = this.#ports;
    if (onFault === undefined) throw error;
    onFault(error);
  }

  #report(): Parameters<Publisher['health']>[0] {
    return {
      status: this.#status,
      lastChange: this.#intake.lastChange,
      engine: this.engine,
      ship: this.#shipper.counts,
      doubt: this.#takeOvers.fight ?? (this.config.clock === 'wall' ? this.#clockWatch.doubt : null),
      counts: {
        clock: this.#clockWatch.counts,
        take_overs: this.#takeOvers.count,
        questions: this.#questions.answered,
        questions_refused: this.#questions.refused,
      },
    };
  }
}
