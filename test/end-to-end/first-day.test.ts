/**
 * A site that starts with nothing, over a real broker: a gateway without a bundle that is killed in the midst of it, a desk,
 * the first model from its archive, sealed and rolled out, and the archive held against what the plant sent.
 */
import { type ChildProcess, spawn } from 'node:child_process';
import { mkdirSync, readFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import {
  formatKey,
  type HealthMessage,
  parseForecastMessage,
  parseHealthMessage,
  publicHalf,
  readEnvelope,
  toHex,
} from '@stillwell/protocol';
import { openConnection } from '@stillwell/runtime/mqtt';
import { expect, onTestFinished, test } from 'vitest';
import { refitCommand } from '../../trainer/commands/refit.ts';
import { sealCommand } from '../../trainer/commands/seal.ts';
import { readSite } from '../../trainer/desk/archive.ts';
import { rollBundle } from '../../trainer/desk/roll.ts';
import { startDesk } from '../../trainer/desk/run.ts';
import { readStatus } from '../../trainer/desk/status.ts';
import { mosquittoMissing, startMosquitto } from '../support/broker.ts';
import { hearing } from '../support/command.ts';
import { testFolder } from '../support/folder.ts';
import { wanderingDays } from '../support/history.ts';
import { author } from '../support/running-site.ts';
import { until } from '../support/until.ts';

const COMMAND = fileURLToPath(new URL('../../runtime/stillwell-gateway.js', import.meta.url));
const HOUR_MS = 3_600_000;
const START_MS = Date.UTC(2026, 0, 1);
const NAMES = ['level', 'flow'] as const;
const SITE_TEXT = `site: new-well
time_zone: UTC
tick: 1h
horizon: 6
signals:
${NAMES.map((name) => `  - {name: ${name}, topic: plant/${name}, payload: {json: /v, time: /t}, unit: m, aggregate: last}`).join('\n')}
`;
const SEGMENT_TICKS = 60;
const RECORDED = 9 * SEGMENT_TICKS;
const TICKS = RECORDED + 100;
const KILL_AT = 250;
const values = wanderingDays(NAMES.length, TICKS, 5);
const PATIENCE_MS = 30_000;

const command = hearing();

test.skipIf(mosquittoMissing !== null)(
  'day one to the first forecast: nothing recorded is lost, and the first model comes from the archive alone',
  async () => {
    const broker = await startMosquitto(['max_queued_messages 0', 'set_tcp_nodelay true']);
    onTestFinished(() => broker.stop());
    const { url } = broker;
    const folder = testFolder();
    const at = (name: string): string => join(folder, name);
    mkdirSync(at('bundles'));
    writeFileSync(at('site.yaml'), SITE_TEXT);
    writeFileSync(at('author.key'), formatKey(author), { mode: 0o600 });
    writeFileSync(at('author.pub'), formatKey(publicHalf(author)));
    const given = ['--site', at('site.yaml'), '--trust', at('author.pub'), '--data', at('data'), '--broker', url];
    const how = ['--gateway', 'g1', '--clock', 'readings', '--segment-ticks', String(SEGMENT_TICKS), '--log', 'warn'];
    const start = (): ChildProcess => spawn(process.execPath, [COMMAND, 'run', ...given, ...how], { stdio: 'inherit' });
    let gateway = start();
    onTestFinished(() => void gateway.kill('SIGKILL'));
    const health: HealthMessage[] = [];
    const origins = new Set<string>();
    const plant = openConnection({
      url,
      clientId: 'plant',
      protocol: 'auto',
      onMessage: (topic, payload) => {
        if (topic.endsWith('/health')) health.push(parseHealthMessage(payload));
        else origins.add(parseForecastMessage(payload).origin);
      },
    });
    onTestFinished(() => plant.end(true));
    await plant.subscribe(['stillwell/new-well/health', 'stillwell/new-well/forecast/level']);
    const desk = await startDesk({
      data: at('desk'),
      broker: url,
      bundles: at('bundles'),
      root: 'stillwell',
      onEvent: () => {},
      bundleCheckMs: 50,
    });
    onTestFinished(() => desk.stop());
    const publish = async (from: number, to: number): Promise<void> => {
      for (let n = from; n < to; n++)
        for (const [c, name] of NAMES.entries()) {
          const t = new Date(START_MS + n * HOUR_MS + 60_000 * c).toISOString();
          const payload = JSON.stringify({ v: values[c]![n], t });
          await plant.publish({ topic: `plant/${name}`, payload, qos: 1, retain: false });
        }
    };
    const archived = async (ticks: number): Promise<void> => {
      let seen = 0;
      const look = setInterval(async () => {
        seen = (await readStatus(desk.store))[0]?.ticks ?? 0;
      }, 100);
      try {
        await until(`${ticks} ticks in the archive`, () => seen >= ticks, PATIENCE_MS);
      } finally {
        clearInterval(look);
      }
    };

    await until('the gateway speaks', () => health.length > 0, PATIENCE_MS);
    expect(health[0]).toMatchObject({
      status: 'no-bundle',
      quality: 'F',
      quality_reason: 'no bundle serves yet: recording',
    });
    await publish(0, KILL_AT);
    gateway.kill('SIGKILL');
    await publish(KILL_AT, KILL_AT + 20);
    gateway = start();
    await publish(KILL_AT + 20, RECORDED + 2);
    await archived(RECORDED);
    const [before] = await readStatus(desk.store);
    expect(before).toMatchObject({ bundle: null, broken: 0, conflicts: 0, waitingForBundle: 0, residuals: [] });

    await command(refitCommand(), '--archive', at('desk'), '--site', at('site.yaml'), '--out', at('first'));
    await command(
      sealCommand(),
      '--candidate',
      at('first/candidate.swc'),
      '--key',
      at('author.key'),
      '--out',
      at('bundles/first.swb'),
    );
    const sealed = new Uint8Array(readFileSync(at('bundles/first.swb')));
    const { digest, sequence } = readEnvelope(sealed);
    const rolled = { broker: url, root: 'stillwell', site: 'new-well', sealed, digest: toHex(digest), sequence };
    expect(await rollBundle({ ...rolled, waitMs: PATIENCE_MS })).toMatchObject({ outcome: 'serving', gateway: 'g1' });
    // Warmed on what was recorded: it forecasts at once, and says nothing of warming up.
    await until('health of the new bundle', () => health.at(-1)?.status === 'running', PATIENCE_MS);
    await publish(RECORDED + 2, TICKS);
    await until('a forecast', () => origins.has(new Date(START_MS + (TICKS - 2) * HOUR_MS).toISOString()), PATIENCE_MS);
    await archived(RECORDED + SEGMENT_TICKS);

    const archive = await readSite(desk.store, 'new-well');
    const first = START_MS / HOUR_MS;
    expect(archive.bundles).toEqual([toHex(digest)]);
    expect(archive.ticks[0]).toBe(first);
    for (const [c, channel] of archive.channels.entries()) {
      expect(channel.lattice!.step).toBe(0.01);
      expect([...channel.values]).toEqual(Array.from(archive.ticks, (tick) => values[c]![tick - first]));
    }
    expect((await readStatus(desk.store))[0]).toMatchObject({ bundle: toHex(digest), broken: 0, conflicts: 0 });
    const gone = new Promise((resolve) => gateway.once('exit', resolve));
    gateway.kill('SIGTERM');
    await gone;
  },
  180_000,
);
