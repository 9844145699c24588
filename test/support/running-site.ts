/** A small invented site with everything a gateway needs to run it: site file, keys, sealed bundles, readings. */
import { createHash } from 'node:crypto';
import {
  createKeyPair,
  encodeBundle,
  type KeyPair,
  parseSite,
  publicHalf,
  type Site,
  schemaHash,
  sealBundle,
  type TrustedKeys,
} from '@stillwell/protocol';
import { type Model, modelFromBundle, runProbe } from '@stillwell/runtime/filter';
import { type ModelChoice, syntheticBundle, syntheticReadings } from './models.ts';

export const SITE_NAME = 'marsh-lane';
export const author: KeyPair = createKeyPair(new Uint8Array(32).fill(7));
export const trusted: TrustedKeys = [publicHalf(author)];

/** Signals level and flow, input pump; readings in JSON with their time. */
export const SITE_TEXT = `site: ${SITE_NAME}
class: test
time_zone: Europe/London
tick: 1min
horizon: 24
lateness: 30s
signals:
  - name: level
    topic: plant/level
    payload: { json: /v, time: /t }
    unit: m
    resolution: 0.01
    aggregate: last
    range: [-100, 100]
    limits: { high: 14 }
  - name: flow
    topic: plant/flow
    payload: { json: /v, time: /t }
    unit: m
    resolution: 0.01
    aggregate: last
inputs:
  - name: pump
    topic: plant/pump
    payload: { json: /v, time: /t }
    unit: m
    resolution: 0.01
    aggregate: last
`;

export const site: Site = parseSite(SITE_TEXT, 'site.yaml');
export const CHANNELS = ['level', 'flow', 'pump'] as const;
/** 2026-03-01T00:00:00Z */
export const FIRST_TICK = Date.UTC(2026, 2, 1) / 60_000;

/** A bundle document for the site whose probe holds. */
export function documentOf(choice: ModelChoice = {}): Uint8Array {
  const draft = syntheticBundle({
    site: SITE_NAME,
    equipmentClass: 'test',
    schema: schemaHash(site),
    tickMs: 60_000,
    signals: ['level', 'flow'],
    inputs: ['pump'],
    warmupTicks: 5,
    ...choice,
  });
  const { outputs, last } = runProbe(modelFromBundle(draft), 5, 64);
  const digest = new Uint8Array(createHash('sha256').update(outputs).digest());
  return encodeBundle({ ...draft, probe: { seed: 5, ticks: 64, digest, last } });
}

/** The same, sealed by `author`. */
export function sealedOf(sequence: number, choice: ModelChoice = {}, epoch = 1): Uint8Array {
  return sealBundle(documentOf(choice), { epoch, sequence }, [author]);
}

const model: Model = modelFromBundle(syntheticBundle({ signals: ['level', 'flow'], inputs: ['pump'], tickMs: 60_000 }));

/** One MQTT message of the plant. */
export interface PlantMessage {
  readonly topic: string;
  readonly payload: Uint8Array;
  readonly timeMs: number;
}

/** Readings of `ticks` ticks, one a channel and tick unless missing, at different seconds of the minute. */
export function plantMessages(ticks: number, seed = 3, missing = 0.05): PlantMessage[][] {
  return syntheticReadings(model, ticks, seed, missing).map((values, n) =>
    [...values].flatMap((value, c) => {
      if (Number.isNaN(value)) return [];
      const timeMs = (FIRST_TICK + n) * 60_000 + 7000 * c + 500;
      return [plantMessage(c, timeMs, Number(value.toFixed(2)))];
    }),
  );
}

/** One reading as the plant sends it. */
export function plantMessage(channel: number, timeMs: number, value: number): PlantMessage {
  const payload = Buffer.from(JSON.stringify({ v: value, t: new Date(timeMs).toISOString() }));
  return { topic: `plant/${CHANNELS[channel]}`, payload, timeMs };
}
