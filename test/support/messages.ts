/** One good message of every kind, for tests to send, read and spoil. */
import type { MessageHead } from '../../protocol/message.ts';

export const T0 = Date.UTC(2026, 2, 1, 12);
export const digest = Uint8Array.from({ length: 32 }, (_, i) => i);
export const head: MessageHead = {
  site: 'mill-lane',
  gateway: 'box-1',
  bundle: digest,
  sequence: 4,
  issuedAtMs: T0 + 1234,
  validUntilMs: T0 + 120_000,
  quality: null,
  qualityReason: null,
};
export const poor: MessageHead = {
  ...head,
  bundle: null,
  sequence: null,
  quality: 'F',
  qualityReason: 'no bundle yet',
};
export const state = {
  ...head,
  originMs: T0,
  tickMs: 60_000,
  filtered: { level: 1.25 },
  state: Float64Array.of(0.5, -2),
  missing: ['inflow'],
};
export const forecast = {
  ...head,
  signal: 'level',
  unit: 'm',
  originMs: T0,
  tickMs: 60_000,
  coverage: 0.9,
  median: [1, 2],
  lower: [0.5, 1],
  upper: [1.5, 3],
  limits: [
    { limit: 'high' as const, value: 2.5, probability: 0.75, timeMs: T0 + 120_000 },
    { limit: 'low' as const, value: 0, probability: 0, timeMs: null },
  ],
  inputs: 'held' as const,
  lastReadingMs: T0 + 30_000,
};
export const forecasts = {
  ...head,
  bundle: digest,
  sequence: 4,
  originMs: T0,
  tickMs: 60_000,
  horizon: 2,
  coverage: 0.9,
  signals: ['level', 'inflow'],
  median: [1, 2, 30, 40],
  lower: [0.5, 1, 20, 20],
  upper: [1.5, 3, 40, 60],
};
export const counters = {
  readings: 10,
  refused: { value: 1 },
  late: 0,
  ticks: 9,
  segments_open: 1,
  segments_waiting: 2,
  segments_confirmed: 3,
};
export const health = {
  ...head,
  status: 'running' as const,
  counters,
  lastChange: { atMs: T0, from: null, to: 'ab'.repeat(32), outcome: 'changed', reason: null },
  versions: { gateway: '0.1.0' },
};
export const receipt = {
  site: 'mill-lane',
  gateway: 'box-1',
  stream: new Uint8Array(8).fill(3),
  segments: [{ number: 0, hash: digest }],
};
export const json = (payload: Uint8Array): Record<string, unknown> => JSON.parse(new TextDecoder().decode(payload));
