/**
 * One simulated site from its past to the end of play: the plant, what its sensors said, its files, its bundles, its
 * forecasts and their scores. The plant never stops between history and play, so play goes on where the log ends.
 */
import { mkdirSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { type ForecastsMessage, forecastPathOf } from '@stillwell/protocol';
import { type Fault, type Roughness, Telemetry } from './faults.ts';
import { type LogHabit, type Scans, writeHistory } from './history-files.ts';
import { buildPlant } from './plants/build.ts';
import type { Plant } from './plants/plant.ts';
import type { DemoSite } from './plants/sites.ts';
import { type Publish, SitePlay } from './play.ts';
import { Scorer } from './scores.ts';
import { describeSite, type SiteDescription, siteText } from './site-files.ts';
import type { SealedBundle } from './workshop.ts';

/** How a site's run is laid out. */
export interface SitePlan {
  readonly site: DemoSite;
  readonly habit: LogHabit;
  readonly seed: number;
  /** Midnight UTC at which play starts, and whole days of history before it. */
  readonly playMs: number;
  readonly historyDays: number;
  readonly faults: readonly Fault[];
  readonly roughness: Roughness;
}

const DAY_MS = 86_400_000;
/** Readings are taken in the last second of their tick. */
const BEFORE_TICK_END_MS = 1000;
/** Ticks sent ahead of the gateway's answer: enough to keep it busy, few enough for a forecast every few ticks. */
const WINDOW = 24;
const PATIENCE_SECONDS = 90;

/** A site under way. */
export class SiteRun {
  readonly name: string;
  readonly tickMs: number;
  readonly description: SiteDescription;
  readonly signalNames: readonly string[];
  /** First tick of play, absolute. */
  readonly playTick: number;
  readonly plant: Plant;
  readonly telemetry: Telemetry;
  readonly scorer: Scorer;
  /** What the sensors said on the last day before play. */
  lastDay: readonly Float64Array[] = [];
  /** What the sensors said at each tick of play, late or not; NaN where silent. */
  readonly said: Float64Array[] = [];
  siteFile = '';
  historyFiles: readonly string[] = [];
  readonly bundles: SealedBundle[] = [];
  /** Under which label an origin is scored. */
  labelOf: (tick: number, digest: string) => string = () => 'play';
  /** Called before each tick is sent, and as each forecast comes in (after it was kept). */
  readonly tickListeners: ((tick: number, said: Float64Array) => void)[] = [];
  readonly forecastListeners: ((origin: number, digest: string) => void)[] = [];
  play: SitePlay | null = null;
  private readonly alarms: { tick: number; ring: () => void }[] = [];
  private readonly plan: SitePlan;

  constructor(plan: SitePlan) {
    const { site, seed } = plan;
    this.plan = plan;
    this.name = site.name;
    this.tickMs = site.design.tickMs;
    this.description = describeSite(site, plan.habit);
    this.signalNames = site.channels.filter((channel) => channel.role === 'signal').map((channel) => channel.name);
    this.playTick = plan.playMs / this.tickMs;
    this.plant = buildPlant(site, seed, plan.playMs - plan.historyDays * DAY_MS);
    this.telemetry = new Telemetry(site.channels, {
      name: `${site.name} play`,
      seed,
      faults: plan.faults,
      roughness: plan.roughness,
    });
    const period = DAY_MS / this.tickMs;
    this.scorer = new Scorer({
      signals: this.signalNames.length,
      horizon: site.horizon,
      period,
      firstTick: this.playTick - period,
    });
  }

  get isWell(): boolean {
    return this.plan.site.kind === 'wet-well';
  }

  /** Ticks a day. */
  get perDay(): number {
    return DAY_MS / this.tickMs;
  }

  /** Bundle that serves, or will. */
  get serving(): SealedBundle {
    const last = this.bundles.at(-1);
    if (last === undefined) throw new Error(`${this.name}: expected a sealed bundle before play, got none`);
    return last;
  }

  /** Standard deviation of each signal while the first bundle learned, in its unit. */
  get deviations(): number[] {
    return this.bundles[0].bundle.channels.slice(0, this.signalNames.length).map((channel) => channel.scale);
  }

  /** Runs the plant through its past and writes site file and history files into `folder`. */
  writeFiles(folder: string): void {
    mkdirSync(folder, { recursive: true });
    this.siteFile = join(folder, 'site.yaml');
    writeFileSync(this.siteFile, siteText(this.description));
    const scans = this.past();
    this.lastDay = scans.rows.slice(-this.perDay);
    for (const row of this.lastDay) this.scorer.addReadings(row);
    this.historyFiles = writeHistory(folder, this.plan.site, this.plan.habit, scans, this.plan.seed);
  }

  /** Makes the play that sends this site's readings. */
  open(publish: Publish): SitePlay {
    this.play = new SitePlay({
      description: this.description,
      source: { next: (tick) => this.next(tick), drain: () => this.telemetry.drain() },
      firstTick: this.playTick,
      publish,
      window: WINDOW,
      patienceSeconds: PATIENCE_SECONDS,
      onSaid: (tick, said) => {
        this.said.push(said);
        this.scorer.addReadings(said);
        for (const listener of this.tickListeners) listener(tick, said);
        for (const alarm of this.alarms) if (alarm.tick === tick) alarm.ring();
      },
    });
    return this.play;
  }

  /** Does something when play has come to a day; resolves when it is done. */
  when(day: number, act: () => Promise<void>): Promise<void> {
    return new Promise((resolve, reject) => {
      const ring = (): void => {
        act().then(resolve, reject);
      };
      this.alarms.push({ tick: this.playTick + Math.round(day * this.perDay), ring });
    });
  }

  /** Takes a forecast message in: paces the play and is kept for scoring. */
  hear(message: ForecastsMessage): void {
    const origin = message.originMs / this.tickMs;
    this.play?.noteClosed(origin);
    const { horizon } = message;
    const path = new Float32Array(message.signals.length * 3 * horizon);
    for (let i = 0; i < message.signals.length; i++) {
      const { median, lower, upper } = forecastPathOf(message, i);
      path.set(median, i * 3 * horizon);
      path.set(lower, (i * 3 + 1) * horizon);
      path.set(upper, (i * 3 + 2) * horizon);
    }
    const digest = Buffer.from(message.bundle).toString('hex');
    this.scorer.addForecast(origin, this.labelOf(origin, digest), path);
    for (const listener of this.forecastListeners) listener(origin, digest);
  }

  private next(tick: number) {
    this.plant.step(tick * this.tickMs);
    return this.telemetry.tick(tick - this.playTick, this.readAt(tick), this.plant.values);
  }

  private readAt(tick: number): number {
    return (tick + 1) * this.tickMs - BEFORE_TICK_END_MS;
  }

  private past(): Scans {
    const { site, seed, historyDays } = this.plan;
    const sensors = new Telemetry(site.channels, { name: `${site.name} past`, seed });
    const ticks = historyDays * this.perDay;
    const timesMs: number[] = [];
    const rows: Float64Array[] = [];
    for (let k = 0; k < ticks; k++) {
      const tick = this.playTick - ticks + k;
      this.plant.step(tick * this.tickMs);
      timesMs.push(this.readAt(tick));
      rows.push(sensors.tick(k, this.readAt(tick), this.plant.values).said);
    }
    return { timesMs, rows };
  }
}
