import { describe, expect, it } from 'vitest';
import { type Fault, type SentReading, SMOOTH, Telemetry } from '../../demo-fleet/faults.ts';
import { DEMO_SITES } from '../../demo-fleet/plants/sites.ts';

const { channels } = DEMO_SITES[0];
const ROUGH = { lateShare: 0.05, lateTicks: 1, veryLateShare: 0.01, veryLateTicks: 9, doubledShare: 0.05 };
const fault = (kind: Fault['kind'], channel: number, from: number, until: number, perTick = 0): Fault => ({
  kind,
  channel,
  from,
  until,
  perTick,
});

function play(telemetry: Telemetry, ticks: number): { said: Float64Array[]; messages: SentReading[] } {
  const said: Float64Array[] = [];
  const messages: SentReading[] = [];
  for (let tick = 0; tick < ticks; tick++) {
    const traffic = telemetry.tick(tick, tick * 60_000, Float64Array.of(2 + tick / 1000, 10, 20, 0.03));
    said.push(traffic.said);
    messages.push(...traffic.messages);
  }
  messages.push(...telemetry.drain());
  return { said, messages };
}

describe('telemetry', () => {
  it('sends everything once and at once on a smooth path', () => {
    const telemetry = new Telemetry(channels, { name: 'a', seed: 1 });
    const { said, messages } = play(telemetry, 500);
    expect(messages.length).toBe(2000);
    for (const [i, message] of messages.entries()) expect(message.value).toBe(said[Math.floor(i / 4)][i % 4]);
  });

  it('loses nothing on a rough path: every reading arrives, late ones after their tick, doubled ones twice', () => {
    const telemetry = new Telemetry(channels, { name: 'a', seed: 1, roughness: ROUGH });
    const { said, messages } = play(telemetry, 3000);
    const { late, veryLate, doubled } = telemetry.counts;
    expect(messages.length).toBe(12_000 + doubled);
    expect(telemetry.counts.sent).toBe(messages.length);
    for (const count of [late, veryLate, doubled]) expect(count).toBeGreaterThan(50);
    const arrived = new Map(messages.map((message) => [`${message.channel} ${message.timeMs}`, message.value]));
    expect(arrived.size).toBe(12_000);
    for (let tick = 0; tick < 3000; tick++)
      for (let channel = 0; channel < 4; channel++)
        expect(arrived.get(`${channel} ${tick * 60_000}`)).toBe(said[tick][channel]);
  });

  it('keeps counted channels in order and single', () => {
    const telemetry = new Telemetry(channels, { name: 'a', seed: 1, roughness: ROUGH });
    const times = play(telemetry, 3000)
      .messages.filter((message) => message.channel === 3)
      .map((message) => message.timeMs);
    expect(times).toEqual(Array.from({ length: 3000 }, (_, tick) => tick * 60_000));
  });

  it('falls silent, sticks and drifts as scheduled', () => {
    const faults = [fault('silent', 0, 10, 20), fault('stuck', 1, 30, 60), fault('drift', 2, 100, 200, 0.05)];
    const { said, messages } = play(new Telemetry(channels, { name: 'a', seed: 1, faults, roughness: SMOOTH }), 300);
    for (let tick = 0; tick < 300; tick++) expect(Number.isNaN(said[tick][0])).toBe(tick >= 10 && tick < 20);
    expect(messages.filter((message) => message.channel === 0).length).toBe(290);
    expect(new Set(said.slice(30, 60).map((row) => row[1])).size).toBe(1);
    expect(new Set(said.slice(60, 90).map((row) => row[1])).size).toBeGreaterThan(1);
    expect(said[250][2]).toBeGreaterThan(24);
    expect(said[99][2]).toBeLessThan(21);
  });
});
