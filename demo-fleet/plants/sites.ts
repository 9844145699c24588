/**
 * The demo's six sites. Places, people and plants are invented; sizes are of the trade's usual order.
 */
import type { ColdStoreDesign } from './cold-store.ts';
import type { WetWellDesign } from './wet-well.ts';

/** A site of the demo: what stands there and what its sensors are. */
export type DemoSite = {
  readonly name: string;
  readonly timeZone: string;
  readonly horizon: number;
  readonly channels: readonly DemoChannel[];
} & (
  | { readonly kind: 'wet-well'; readonly design: WetWellDesign }
  | { readonly kind: 'cold-store'; readonly design: ColdStoreDesign }
);

/** One channel in the plant's order, with its sensor. */
export interface DemoChannel {
  readonly name: string;
  readonly role: 'signal' | 'input';
  readonly unit: string;
  /** Smallest step the sensor tells, in `unit`. */
  readonly resolution: number;
  readonly range: readonly [number, number];
  /** Standard deviation of the noise before rounding, in `unit`. */
  readonly noise: number;
  readonly limits: { readonly high?: number; readonly highHigh?: number; readonly low?: number };
  readonly aggregate: 'last' | 'sum';
  /** Whether somebody plans it and says so ahead. */
  readonly isPlanned?: boolean;
}

const MINUTE = 60_000;

const wellChannels = (high: number, highHigh: number, hasGauge: boolean): readonly DemoChannel[] => {
  const base = { role: 'signal', limits: {}, aggregate: 'last' } as const;
  const channels: DemoChannel[] = [
    { ...base, name: 'level', unit: 'm', resolution: 0.005, range: [0, 6], noise: 0.004, limits: { high, highHigh } },
    { ...base, name: 'current', unit: 'A', resolution: 0.1, range: [0, 100], noise: 0.12 },
    { ...base, name: 'outflow', unit: 'L/s', resolution: 0.1, range: [0, 120], noise: 0.15 },
  ];
  const gauge: DemoChannel = {
    name: 'rain',
    role: 'input',
    unit: 'mm',
    resolution: 0.2,
    range: [0, 20],
    noise: 0,
    limits: {},
    aggregate: 'sum',
  };
  return hasGauge ? [...channels, gauge] : channels;
};

const storeChannels = (high: number, highHigh: number, low: number, hasDefrosts: boolean): readonly DemoChannel[] => {
  const base = { role: 'signal', limits: {}, aggregate: 'last' } as const;
  const channels: DemoChannel[] = [
    {
      ...base,
      name: 'room',
      unit: 'Cel',
      resolution: 0.05,
      range: [-45, 60],
      noise: 0.04,
      limits: { high, highHigh, low },
    },
    { ...base, name: 'suction', unit: 'Cel', resolution: 0.1, range: [-60, 60], noise: 0.1 },
    { ...base, name: 'power', unit: 'kW', resolution: 0.05, range: [0, 80], noise: 0.06 },
    { ...base, role: 'input', name: 'outdoor', unit: 'Cel', resolution: 0.1, range: [-40, 50], noise: 0.08 },
  ];
  const command: DemoChannel = {
    ...base,
    role: 'input',
    name: 'defrost',
    unit: '1',
    resolution: 1,
    range: [0, 1],
    noise: 0,
    isPlanned: true,
  };
  return hasDefrosts ? [...channels, command] : channels;
};

const well = (
  name: string,
  design: Omit<WetWellDesign, 'tickMs' | 'utcOffsetHours'>,
  limits: readonly [number, number],
): DemoSite => ({
  kind: 'wet-well',
  name,
  timeZone: 'UTC',
  horizon: 60,
  channels: wellChannels(limits[0], limits[1], design.hasGauge),
  design: { ...design, tickMs: MINUTE, utcOffsetHours: 0 },
});

const store = (
  name: string,
  tickMinutes: number,
  horizon: number,
  design: Omit<ColdStoreDesign, 'tickMs' | 'utcOffsetHours'>,
  limits: readonly [number, number, number],
): DemoSite => ({
  kind: 'cold-store',
  name,
  // A zone without clock changes, one hour ahead: local times in its logs are unambiguous but not UTC.
  timeZone: 'Africa/Algiers',
  horizon,
  channels: storeChannels(...limits, design.defrost !== null),
  design: { ...design, tickMs: tickMinutes * MINUTE, utcOffsetHours: 1 },
});

/** Wells: one with a rain gauge, a small quick one, a large slow one. Stores: chilled, frozen with planned defrosts, fruit. */
export const DEMO_SITES: readonly DemoSite[] = [
  well(
    'quennadale',
    {
      area: 14,
      overflowLevel: 4.2,
      dischargeHeight: 17,
      pipe: { length: 640, diameter: 0.2, roughness: 0.00015, minorLoss: 8 },
      pump: { shutOffHead: 30, slope: 9000, efficiency: 0.58, voltage: 400, powerFactor: 0.84 },
      levels: [
        { start: 2.2, stop: 0.9 },
        { start: 2.7, stop: 1.3 },
      ],
      meanInflow: 0.0135,
      dailySwing: 0.45,
      weekendShare: 0.93,
      rain: { daysBetween: 2.2, hoursLong: 1.6, depth: 6, pavedArea: 26_000, lagSeconds: 2400 },
      hasGauge: true,
    },
    [2.9, 3.6],
  ),
  well(
    'brackwith',
    {
      area: 6,
      overflowLevel: 3.4,
      dischargeHeight: 11,
      pipe: { length: 310, diameter: 0.15, roughness: 0.0001, minorLoss: 6 },
      pump: { shutOffHead: 21, slope: 24_000, efficiency: 0.52, voltage: 400, powerFactor: 0.81 },
      levels: [
        { start: 1.9, stop: 0.7 },
        { start: 2.3, stop: 1.0 },
      ],
      meanInflow: 0.0065,
      dailySwing: 0.5,
      weekendShare: 1.08,
      rain: { daysBetween: 2.6, hoursLong: 1.2, depth: 4, pavedArea: 9_000, lagSeconds: 1500 },
      hasGauge: false,
    },
    [2.5, 3.0],
  ),
  well(
    'ellerquint',
    {
      area: 38,
      overflowLevel: 4.6,
      dischargeHeight: 24,
      pipe: { length: 1450, diameter: 0.3, roughness: 0.0002, minorLoss: 10 },
      pump: { shutOffHead: 41, slope: 3600, efficiency: 0.63, voltage: 400, powerFactor: 0.86 },
      levels: [
        { start: 2.6, stop: 1.1 },
        { start: 3.1, stop: 1.6 },
      ],
      meanInflow: 0.031,
      dailySwing: 0.4,
      weekendShare: 0.95,
      rain: { daysBetween: 2.4, hoursLong: 3, depth: 5, pavedArea: 60_000, lagSeconds: 3600 },
      hasGauge: false,
    },
    [3.3, 4.1],
  ),
  store(
    'penvarrow',
    2,
    60,
    {
      setPoint: 2,
      deadBand: 2.4,
      roomMass: 2600,
      productMass: 62_000,
      coilMass: 180,
      wall: 0.14,
      product: 0.9,
      coil: 2.4,
      boiling: 3.1,
      fans: 0.9,
      idleFanShare: 0.5,
      capacity: 26,
      capacitySlope: 0.028,
      carnotShare: 0.45,
      condenserRise: 13,
      door: { area: 5, height: 2.4, openingsPerHour: 16, secondsOpen: 35, leak: 0.11 },
      defrost: null,
      climate: { yearMean: 10, yearSwing: 8, daySwing: 3.6, fronts: 2.4, relativeHumidity: 0.74 },
    },
    [5, 8, -1],
  ),
  store(
    'tessenby',
    2,
    60,
    {
      setPoint: -20,
      deadBand: 2.6,
      roomMass: 3400,
      productMass: 140_000,
      coilMass: 260,
      wall: 0.11,
      product: 1.2,
      coil: 3.0,
      boiling: 3.8,
      fans: 1.3,
      idleFanShare: 0.4,
      capacity: 52,
      capacitySlope: 0.021,
      carnotShare: 0.43,
      condenserRise: 14,
      door: { area: 4, height: 2.4, openingsPerHour: 9, secondsOpen: 25, leak: 0.05 },
      defrost: {
        windows: [
          [0, 7],
          [9, 15],
          [17, 23],
        ],
        minutes: 20,
        power: 10,
      },
      climate: { yearMean: 8, yearSwing: 9, daySwing: 3, fronts: 2.8, relativeHumidity: 0.8 },
    },
    [-16, -12, -25],
  ),
  store(
    'stavendrith',
    5,
    48,
    {
      setPoint: 6,
      deadBand: 2,
      roomMass: 5200,
      productMass: 210_000,
      coilMass: 240,
      wall: 0.2,
      product: 1.1,
      coil: 2.6,
      boiling: 3.4,
      fans: 1.1,
      idleFanShare: 0.6,
      capacity: 22,
      capacitySlope: 0.03,
      carnotShare: 0.47,
      condenserRise: 12,
      door: { area: 6, height: 2.8, openingsPerHour: 10, secondsOpen: 60, leak: 0.08 },
      defrost: null,
      climate: { yearMean: 12, yearSwing: 7, daySwing: 4.4, fronts: 2, relativeHumidity: 0.68 },
    },
    [9, 12, 2],
  ),
];
