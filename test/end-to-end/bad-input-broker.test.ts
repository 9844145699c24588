/** Brokers that are not there, refuse, hang up or keep silent, and two processes on one data folder. */
import { type ChildProcess, spawn } from 'node:child_process';
import { rmSync } from 'node:fs';
import { type AddressInfo, createServer, type Server, type Socket } from 'node:net';
import { join } from 'node:path';
import { formatKey, publicHalf } from '@stillwell/protocol';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { Folders } from '../support/bad-input.ts';
import { freePort, mosquittoMissing, startAedes, startMosquitto, type TestBroker } from '../support/broker.ts';
import { expectRefusal, PROGRAMS, run } from '../support/cli.ts';
import { author, SITE_TEXT, sealedOf } from '../support/running-site.ts';
import { until } from '../support/until.ts';

const folders = new Folders();
const sockets = new Set<Socket>();
const servers: Server[] = [];
let down = '';
let dropping = '';
let silent = '';
let mute = '';
let broker: TestBroker;

/** A server that is no broker, as an address. */
async function serve(onSocket: (socket: Socket) => void): Promise<string> {
  const server = createServer((socket) => {
    sockets.add(socket);
    socket.on('error', () => {});
    onSocket(socket);
  });
  servers.push(server);
  await new Promise<void>((resolve) => server.listen(0, '127.0.0.1', resolve));
  return `mqtt://127.0.0.1:${(server.address() as AddressInfo).port}`;
}

beforeAll(async () => {
  down = `mqtt://127.0.0.1:${await freePort()}`;
  dropping = await serve((socket) => socket.destroy());
  silent = await serve((socket) => socket.resume());
  // Lets everyone in (CONNACK of MQTT 5, section 3.2) and never says another word.
  mute = await serve((socket) => socket.once('data', () => socket.write(Uint8Array.of(0x20, 3, 0, 0, 0))));
  broker = await startAedes();
});
afterAll(async () => {
  for (const socket of sockets) socket.destroy();
  for (const server of servers) server.close();
  await broker.stop();
  folders.remove();
});

const always = {
  'site.yaml': SITE_TEXT,
  'author.pub': formatKey(publicHalf(author)),
  'first.swb': sealedOf(1),
};
const roll = (url: string): string => `stillwell roll --bundle first.swb --broker ${url} --wait 1`;
const watch = (url: string): string => `stillwell watch --site marsh-lane --once --json --wait 1 --broker ${url}`;
const check = (url: string): string =>
  `stillwell-gateway check --site site.yaml --trust author.pub --seconds 0 --json --broker ${url}`;
const desk = (url: string): string => `stillwell desk --data data --broker ${url}`;
const PATIENCE_MS = 120_000;

describe('refused in one line, exit code 2, in bounded time', () => {
  const refuse = (line: string, ...says: RegExp[]): Promise<void> => folders.refuse({ line, says }, always);
  /** For those that take their time: side by side, each a process of its own. */
  const waited = (line: string, ...says: RegExp[]): Promise<void> => expectRefusal(line, folders.make(always), says);

  it.concurrent(
    'down',
    async () => {
      const says = [
        /broker mqtt:\/\/127\.0\.0\.1:\d+: nothing listens there/,
        /check address and port, and that the broker runs$/m,
      ];
      await refuse(roll(down), ...says);
      await refuse(watch(down), ...says);
      await refuse(check(down), ...says);
    },
    PATIENCE_MS,
  );

  it.concurrent(
    'hangs up at once',
    async () => {
      const says = [
        /broker mqtt:.*: connection closed by the broker; check that address and port are a broker's, and its log/,
      ];
      await refuse(roll(dropping), ...says);
      await refuse(watch(dropping), ...says);
      await refuse(check(dropping), ...says);
    },
    PATIENCE_MS,
  );

  const noAnswer = (to: string): RegExp => new RegExp(`no answer to ${to} within 1[05] s; check that address and port`);
  it.concurrent('never answers: roll', () => waited(roll(silent), noAnswer('connecting')), PATIENCE_MS);
  it.concurrent('never answers: check', () => waited(check(silent), noAnswer('connecting')), PATIENCE_MS);
  it.concurrent('lets in and is mute: watch', () => waited(watch(mute), noAnswer('subscribing')), PATIENCE_MS);
  it.concurrent('lets in and is mute: check', () => waited(check(mute), noAnswer('subscribing')), PATIENCE_MS);

  it.concurrent(
    'no address of a broker: nothing is made for it',
    async () => {
      await refuse(desk('http://localhost'), /--broker: broker "http:\/\/localhost": expected mqtt:\/\/ or mqtts:\/\//);
      await refuse(check('mqtt://localhost:99999'), /expected an address such as mqtt:\/\/localhost:1883/);
    },
    PATIENCE_MS,
  );
});

it.skipIf(mosquittoMissing !== null)(
  'a password that is not known',
  async () => {
    const strict = await startMosquitto(['allow_anonymous false', 'password_file /dev/null']);
    try {
      const says = [/not let in \(not authorised\); check user and password/];
      await folders.refuse({ line: roll(strict.url.replace('//', '//who:ever@')), says }, always);
      await folders.refuse({ line: check(strict.url), says }, always);
    } finally {
      await strict.stop();
    }
  },
  PATIENCE_MS,
);

it(
  'a broker that is there',
  async () => {
    const folder = folders.make(always);
    expect(await run(check(broker.url), folder)).toMatchObject({ code: 0, err: '' });
    // Nothing wrong with the input: nobody spoke in time, which is exit code 1.
    expect(await run(watch(broker.url), folder)).toMatchObject({ code: 1 });
  },
  PATIENCE_MS,
);

it(
  'two desks on one data folder, two gateways on another',
  async () => {
    const folder = folders.make(always);
    const start = `stillwell-gateway run --site site.yaml --trust author.pub --data plant --broker ${broker.url}`;
    const running: ChildProcess[] = [];
    try {
      for (const [line, sign] of [
        [desk(broker.url), 'collecting'],
        [start, 'no bundle yet'],
      ] as const) {
        const [program, ...args] = line.split(' ');
        const child = spawn(process.execPath, [PROGRAMS[program as keyof typeof PROGRAMS], ...args], { cwd: folder });
        running.push(child);
        let out = '';
        child.stdout.on('data', (chunk) => {
          out += chunk;
        });
        await until(`${program} is up`, () => out.includes(sign), PATIENCE_MS);
        const second = await run(line, folder);
        expect(second.err).toMatch(new RegExp(`process ${child.pid}.*(give another|a folder of its own)`));
        expect(second.err.trim().split('\n')).toHaveLength(1);
        expect(second.code).toBe(2);
      }
    } finally {
      for (const child of running) child.kill('SIGKILL');
      rmSync(join(folder, 'data'), { recursive: true, force: true });
    }
  },
  PATIENCE_MS,
);
