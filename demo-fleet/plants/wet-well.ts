/**
 * A sewage wet well: hidden inflow with a daily pattern and rain, two on/off pumps that start and stop at their own
 * levels, one rising main. Volume balance dV/dt = Qin - Qpump - Qoverflow by explicit steps of a few seconds, so that
 * what goes in, comes out or stays adds up to rounding.
 *
 * channels  level m, current A (both motors together), outflow L/s and, where the site has a gauge, rain mm since the last tick
 */
import type { Random } from '../random.ts';
import { headLoss, type Pipe } from './pipe.ts';
import { dayOfWeek, hourOfDay, type Plant } from './plant.ts';
import { dutyFlow, motorCurrent, type Pump, WATER_VISCOSITY } from './pump.ts';
import { type Rain, startRain, stepRain } from './rain.ts';

/** Everything fixed about one well. Levels in m above its floor, flows in m³/s. */
export interface WetWellDesign {
  readonly tickMs: number;
  readonly utcOffsetHours: number;
  readonly area: number;
  /** Level at which it spills, and height of the discharge above the floor. */
  readonly overflowLevel: number;
  readonly dischargeHeight: number;
  readonly pipe: Pipe;
  readonly pump: Pump;
  /** Start and stop level of the leading pump, then of the second. */
  readonly levels: readonly [
    { readonly start: number; readonly stop: number },
    { readonly start: number; readonly stop: number },
  ];
  readonly meanInflow: number;
  /** Strength of the daily course, 0 … 1, and the weekend's share of a weekday's flow. */
  readonly dailySwing: number;
  readonly weekendShare: number;
  /** Strength of the dry-weather inflow's wander, 1 unless given: a large catchment's many sources even out. */
  readonly wander?: number;
  readonly rain: Rain;
  readonly hasGauge: boolean;
}

/** Longest step of the balance, s: a pump start is placed to within this. */
const STEP_SECONDS = 5;
/** Head a pump loses at the end of its life, as a share of its shut-off head (common practice: refit well before). */
const WORN_HEAD_SHARE = 0.3;
/** Two-minute and two-hour wander of the dry-weather inflow: standard deviation as a share of the mean. */
const WANDERS = [
  { seconds: 150, share: 0.1 },
  { seconds: 7200, share: 0.09 },
] as const;

/** Volumes since the start, m³: what the balance is checked with. */
export interface WetWellLedger {
  inflow: number;
  pumped: number;
  spilled: number;
}

/** The well in motion. */
export class WetWell implements Plant {
  readonly values: Float64Array;
  readonly ledger: WetWellLedger = { inflow: 0, pumped: 0, spilled: 0 };
  volume: number;
  /** Pumps running now: 0, 1 or 2. */
  running = 0;
  private readonly design: WetWellDesign;
  private readonly random: Random;
  private readonly rain;
  private readonly wanders = new Float64Array(WANDERS.length);
  private worn = 0;
  private readonly on: [boolean, boolean] = [false, false];

  constructor(design: WetWellDesign, random: Random, startMs: number) {
    this.design = design;
    this.random = random;
    this.volume = design.area * (design.levels[0].start + design.levels[0].stop) * 0.5;
    this.rain = startRain(design.rain, random, startMs / 1000);
    this.values = new Float64Array(design.hasGauge ? 4 : 3);
  }

  get level(): number {
    return this.volume / this.design.area;
  }

  wear(share: number): void {
    this.worn = share;
  }

  step(fromMs: number): void {
    const { design, values } = this;
    const seconds = design.tickMs / 1000;
    const steps = Math.max(1, Math.round(seconds / STEP_SECONDS));
    const dt = seconds / steps;
    const fallenBefore = this.rain.fallen;
    let flow = 0;
    for (let i = 0; i < steps; i++) flow = this.advance(fromMs + i * dt * 1000, dt);
    values[0] = this.level;
    values[1] =
      this.running === 0 ? 0 : this.running * motorCurrent(design.pump, flow / this.running, this.pumpHead(flow));
    values[2] = flow * 1000;
    if (design.hasGauge) values[3] = this.rain.fallen - fallenBefore;
  }

  /** One step of the balance; the pumped flow during it, m³/s. */
  private advance(nowMs: number, dt: number): number {
    const { design, ledger } = this;
    const inflow = this.inflow(nowMs, dt);
    this.switchPumps();
    const wear = WORN_HEAD_SHARE * this.worn;
    const flow = dutyFlow(design.pump, design.pipe, this.running, design.dischargeHeight - this.level, wear);
    let volume = this.volume + (inflow - flow) * dt;
    const spilled = Math.max(0, volume - design.overflowLevel * design.area);
    volume -= spilled;
    this.volume = volume;
    ledger.inflow += inflow * dt;
    ledger.pumped += flow * dt;
    ledger.spilled += spilled;
    return flow;
  }

  private switchPumps(): void {
    const level = this.level;
    for (const index of [0, 1] as const) {
      const { start, stop } = this.design.levels[index];
      if (level >= start) this.on[index] = true;
      else if (level <= stop) this.on[index] = false;
    }
    this.running = Number(this.on[0]) + Number(this.on[1]);
  }

  private inflow(nowMs: number, dt: number): number {
    const { design, random, wanders } = this;
    stepRain(design.rain, this.rain, random, nowMs / 1000, dt);
    let wander = 0;
    for (let i = 0; i < WANDERS.length; i++) {
      const keep = Math.exp(-dt / WANDERS[i].seconds);
      wanders[i] = keep * wanders[i] + WANDERS[i].share * Math.sqrt(1 - keep * keep) * random.normal();
      wander += (design.wander ?? 1) * wanders[i];
    }
    const dry = design.meanInflow * dailyShare(design, nowMs) * Math.max(0.1, 1 + wander);
    return dry + this.rain.runoff;
  }

  /** Head each pump works against, m. */
  private pumpHead(flow: number): number {
    const { design } = this;
    return design.dischargeHeight - this.level + headLoss(design.pipe, flow, WATER_VISCOSITY);
  }
}

/** Dry-weather flow by the hour as a share of the mean: a morning and an evening peak, a quiet night (common practice). */
function dailyShare(design: WetWellDesign, nowMs: number): number {
  const hour = hourOfDay(nowMs, design.utcOffsetHours);
  const weekend = dayOfWeek(nowMs, design.utcOffsetHours) >= 5;
  const angle = (2 * Math.PI * (hour - (weekend ? 1 : 0))) / 24;
  const course = 0.62 * Math.cos(angle - (2 * Math.PI * 14) / 24) + 0.38 * Math.cos(2 * angle - (4 * Math.PI * 8) / 24);
  return (weekend ? design.weekendShare : 1) * (1 + design.dailySwing * course);
}
