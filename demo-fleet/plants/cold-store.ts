/**
 * A cold store: room air, product and evaporator coil as three thermal masses, a compressor that cycles on the room
 * thermostat's dead-band, doors that open by the day's pattern, weather outside. Energy in kJ, temperatures in °C,
 * explicit steps of a few seconds, so that the stored energy and the flows add up to rounding.
 *
 * channels  room °C, suction °C (evaporating temperature), power kW, outdoor °C and, where defrosts are commanded, the
 *           command, 0 or 1
 */
import type { Random } from '../random.ts';
import type { DefrostDesign, DefrostTimes } from './defrost.ts';
import { doorwayHeat, humidityRatio } from './moist-air.ts';
import { dayOfWeek, hourOfDay, type Plant } from './plant.ts';
import { type Climate, startWeather, stepWeather } from './weather.ts';

/** Everything fixed about one store. Masses in kJ/K, conductances in kW/K. */
export interface ColdStoreDesign {
  readonly tickMs: number;
  readonly utcOffsetHours: number;
  readonly setPoint: number;
  /** The thermostat starts at set-point + half of it and stops at set-point - half of it, K. */
  readonly deadBand: number;
  readonly roomMass: number;
  readonly productMass: number;
  readonly coilMass: number;
  readonly wall: number;
  readonly product: number;
  readonly coil: number;
  /** Between coil metal and boiling refrigerant. */
  readonly boiling: number;
  /** Fans and lamps, kW of heat while the fans run, and share of it while the compressor rests. */
  readonly fans: number;
  readonly idleFanShare: number;
  /** Cooling at 0 °C evaporating, kW, and its relative change per K. */
  readonly capacity: number;
  readonly capacitySlope: number;
  /** Share of Carnot's efficiency reached between evaporating and condensing, and condensing above outdoor, K. */
  readonly carnotShare: number;
  readonly condenserRise: number;
  readonly door: Door;
  /** Electric defrosts; null where frost thaws off by itself while the compressor rests. */
  readonly defrost: DefrostDesign | null;
  readonly climate: Climate;
}

/** Doorway in m and m²; openings an hour at the busiest, seconds each; `leak` is the share of the opening lost to a worn seal. */
export interface Door {
  readonly area: number;
  readonly height: number;
  readonly openingsPerHour: number;
  readonly secondsOpen: number;
  readonly leak: number;
}

/** Longest step of the balance, s. */
const STEP_SECONDS = 10;
/** Weakest part of the day's door traffic, and the hours (local) of the two peaks with their width. */
const QUIET_SHARE = 0.03;
const PEAKS = [
  { hour: 7.5, width: 1.4, height: 1 },
  { hour: 14.5, width: 2, height: 0.7 },
] as const;
/** Kelvin between 0 °C and absolute zero. */
const KELVIN = 273.15;

/** Energy since the start, kJ: what the balance is checked with. */
export interface ColdStoreLedger {
  wall: number;
  doors: number;
  fans: number;
  defrost: number;
  removed: number;
  /** Electric energy of the compressor, kJ. */
  compressor: number;
}

/** The store in motion. */
export class ColdStore implements Plant {
  readonly values: Float64Array;
  readonly ledger: ColdStoreLedger = { wall: 0, doors: 0, fans: 0, defrost: 0, removed: 0, compressor: 0 };
  room: number;
  productTemperature: number;
  coilTemperature: number;
  cooling = false;
  private readonly design: ColdStoreDesign;
  private readonly random: Random;
  private readonly defrosts: DefrostTimes | null;
  private readonly weather;
  private worn = 0;
  private doorOpenFor = 0;

  /** `defrosts`: when the heaters are commanded on; null where there are none. */
  constructor(design: ColdStoreDesign, random: Random, defrosts: DefrostTimes | null) {
    this.design = design;
    this.random = random;
    this.defrosts = defrosts;
    this.values = new Float64Array(defrosts === null ? 4 : 5);
    this.room = design.setPoint;
    this.productTemperature = design.setPoint;
    this.coilTemperature = design.setPoint - 3;
    this.weather = startWeather(design.climate, random);
  }

  /** Energy stored in the three masses, kJ above 0 °C. */
  get stored(): number {
    const { design } = this;
    return (
      design.roomMass * this.room +
      design.productMass * this.productTemperature +
      design.coilMass * this.coilTemperature
    );
  }

  wear(share: number): void {
    this.worn = share;
  }

  step(fromMs: number): void {
    const { design, values } = this;
    const seconds = design.tickMs / 1000;
    const steps = Math.max(1, Math.round(seconds / STEP_SECONDS));
    const dt = seconds / steps;
    for (let i = 0; i < steps; i++) this.advance(fromMs + i * dt * 1000, dt);
    values[0] = this.room;
  }

  private advance(nowMs: number, dt: number): void {
    const { design, ledger, values } = this;
    const outdoor = stepWeather(design.climate, this.weather, this.random, nowMs, dt, design.utcOffsetHours);
    const thawing = this.defrosts?.isOn(nowMs) ?? false;
    this.thermostat(thawing);

    const wall = design.wall * (outdoor - this.room);
    const doors = this.doorHeat(nowMs, dt, outdoor);
    const fans = thawing ? 0 : design.fans * (this.cooling ? 1 : design.idleFanShare);
    const heater = thawing ? (design.defrost?.power ?? 0) : 0;
    const fromProduct = design.product * (this.productTemperature - this.room);
    // Fans off: the coil meets the room by free convection alone, about a tenth (common practice).
    const toCoil = design.coil * (thawing ? 0.1 : this.cooling ? 1 : 0.35) * (this.room - this.coilTemperature);
    const duty = this.cooling ? evaporate(design, this.coilTemperature, outdoor) : RESTING;
    const suction = this.cooling ? duty.evaporating : this.coilTemperature;

    this.room += ((wall + doors + fans + fromProduct - toCoil) * dt) / design.roomMass;
    this.productTemperature -= (fromProduct * dt) / design.productMass;
    this.coilTemperature += ((toCoil + heater - duty.removed) * dt) / design.coilMass;

    ledger.wall += wall * dt;
    ledger.doors += doors * dt;
    ledger.fans += fans * dt;
    ledger.defrost += heater * dt;
    ledger.removed += duty.removed * dt;
    ledger.compressor += duty.power * dt;
    values[1] = suction;
    values[2] = duty.power + fans + heater;
    values[3] = outdoor;
    if (this.defrosts !== null) values[4] = thawing ? 1 : 0;
  }

  private thermostat(thawing: boolean): void {
    const { setPoint, deadBand } = this.design;
    if (thawing) this.cooling = false;
    else if (this.room >= setPoint + deadBand / 2) this.cooling = true;
    else if (this.room <= setPoint - deadBand / 2) this.cooling = false;
  }

  /** kW through the doorway now: fully while it stands open, and the worn seal's share all the time. */
  private doorHeat(nowMs: number, dt: number, outdoor: number): number {
    const { door, climate } = this.design;
    this.doorOpenFor = Math.max(0, this.doorOpenFor - dt);
    const perSecond = (door.openingsPerHour * doorTraffic(nowMs, this.design.utcOffsetHours)) / 3600;
    if (this.random.uniform() < perSecond * dt) this.doorOpenFor += 20 + this.random.exponential(door.secondsOpen);
    const open = (this.doorOpenFor > 0 ? 1 : 0) + door.leak * this.worn;
    if (open === 0) return 0;
    const inside = { temperature: this.room, humidityRatio: humidityRatio(this.room, 0.85) };
    const outside = { temperature: outdoor, humidityRatio: humidityRatio(outdoor, climate.relativeHumidity) };
    return open * doorwayHeat(inside, outside, door.area, door.height);
  }
}

const RESTING = { removed: 0, power: 0, evaporating: 0 } as const;

/**
 * Where compressor and coil meet: capacity c0 (1 + s Te) equals boiling × (coil - Te), solved for Te; power by a share of
 * Carnot's efficiency between Te and the condensing temperature.
 */
function evaporate(
  design: ColdStoreDesign,
  coil: number,
  outdoor: number,
): { removed: number; power: number; evaporating: number } {
  const { boiling, capacity, capacitySlope } = design;
  const evaporating = (boiling * coil - capacity) / (boiling + capacity * capacitySlope);
  const removed = Math.max(0, boiling * (coil - evaporating));
  const lift = Math.max(10, outdoor + design.condenserRise - evaporating);
  const efficiency = (design.carnotShare * (evaporating + KELVIN)) / lift;
  return { removed, power: removed / efficiency, evaporating };
}

/** Door traffic as a share of the busiest hour; Sundays rest. */
function doorTraffic(nowMs: number, utcOffsetHours: number): number {
  if (dayOfWeek(nowMs, utcOffsetHours) === 6) return QUIET_SHARE;
  const hour = hourOfDay(nowMs, utcOffsetHours);
  let share = QUIET_SHARE;
  for (const peak of PEAKS) share += peak.height * Math.exp(-(((hour - peak.hour) / peak.width) ** 2));
  return share;
}
