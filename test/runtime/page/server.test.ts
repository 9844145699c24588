/** What the page's server answers, refuses and bears: read-only, bounded, and never in the loop's way. */
import { connect, type Socket } from 'node:net';
import { afterEach, expect, test } from 'vitest';
import { systemClock } from '../../../runtime/clock.ts';
import { isLoopback, parsePageAddress } from '../../../runtime/page/address.ts';
import { ownNames, refusalOf } from '../../../runtime/page/guard.ts';
import { Page } from '../../../runtime/page/page.ts';
import { PageServer } from '../../../runtime/page/server.ts';
import { freePort } from '../../support/broker.ts';
import { testFolder } from '../../support/folder.ts';
import { openStage, type PageStage } from '../../support/page-stage.ts';
import { until } from '../../support/until.ts';

const sockets: Socket[] = [];
let stage: PageStage | null = null;
afterEach(async () => {
  for (const socket of sockets.splice(0)) socket.destroy();
  await stage?.stop();
  stage = null;
});

interface Heard {
  readonly socket: Socket;
  text: string;
  isClosed: boolean;
}

/** A bare connection, to say what no well-behaved client says. */
function dial(url: string, words: string): Heard {
  const socket = connect(Number(new URL(url).port), '127.0.0.1');
  const heard: Heard = { socket, text: '', isClosed: false };
  sockets.push(socket);
  socket.on('data', (bytes) => {
    heard.text += bytes;
  });
  socket.on('error', () => {});
  socket.on('close', () => {
    heard.isClosed = true;
  });
  socket.write(words);
  return heard;
}

const get = (path: string, extra = ''): string => `GET ${path} HTTP/1.1\r\nHost: localhost\r\n${extra}\r\n`;

test('--page: off, a port, a host and a port; anything else is one sentence', () => {
  expect(parsePageAddress(undefined)).toEqual({ host: '127.0.0.1', port: 13_480, tries: 16 });
  expect(parsePageAddress('off')).toBeNull();
  expect(parsePageAddress('8080')).toEqual({ host: '127.0.0.1', port: 8080, tries: 1 });
  expect(parsePageAddress('0.0.0.0:80')).toEqual({ host: '0.0.0.0', port: 80, tries: 1 });
  expect(parsePageAddress('[::1]:9000')).toEqual({ host: '::1', port: 9000, tries: 1 });
  for (const bad of ['', 'on', '70000', ':80', 'a b:80', '[12]:80', '::1:80', '80:', '-1'])
    expect(() => parsePageAddress(bad), bad).toThrow(/^--page: expected off, a port, or host:port .* got/);
  expect(['127.0.0.1', '127.9.9.9', '::1', 'localhost', '0.0.0.0', '10.0.0.1', 'pump'].map(isLoopback)).toEqual([
    ...[true, true, true, true],
    ...[false, false, false],
  ]);
});

test('hosts: addresses and own names only, so that no foreign name leads here', () => {
  const local = ownNames('127.0.0.1', 'pump-gate', true);
  const status = (host: string, names = local, headers = {}) =>
    refusalOf({ method: 'GET', headers: { host, ...headers } }, names)?.status ?? 200;
  for (const host of ['localhost', 'LOCALHOST:13480', 'localhost.', '127.0.0.1:1', '[::1]:80', '10.1.2.3'])
    expect(status(host), host).toBe(200);
  for (const host of [
    '',
    'evil.example',
    'localhost.evil.example',
    '127.0.0.1.evil.example',
    'pump-gate',
    'a b',
    '[::1',
    'x@localhost',
  ])
    expect(status(host), host).toBe(421);
  const open = ownNames('0.0.0.0', 'pump-gate', false);
  expect(status('pump-gate:80', open)).toBe(200);
  expect(status('pump-gate.local', open)).toBe(200);
  expect(status('pump-gate.evil.example', open)).toBe(421);
  expect(status('localhost', local, { 'sec-fetch-site': 'cross-site', 'sec-fetch-mode': 'cors' })).toBe(403);
  expect(status('localhost', local, { 'sec-fetch-site': 'cross-site', 'sec-fetch-mode': 'navigate' })).toBe(200);
  expect(status('localhost', local, { 'sec-fetch-site': 'same-origin' })).toBe(200);
  expect(status('localhost', local, { 'content-length': '5' })).toBe(400);
  expect(status('localhost', local, { 'transfer-encoding': 'chunked' })).toBe(400);
});

test('every answer forbids what it does not need; only GET and HEAD are answered', async () => {
  stage = await openStage({ data: testFolder(), limits: { requests: { burst: 1000, perSecond: 20 } } });
  const types = {
    '': 'text/html',
    'state.json': 'application/json',
    metrics: 'application/openmetrics-text',
    healthz: 'application/json',
  };
  for (const [path, type] of Object.entries(types)) {
    const answer = await fetch(stage.url + path);
    expect(answer.status, path).toBe(200);
    expect(answer.headers.get('content-type'), path).toContain(type);
    expect(answer.headers.get('content-security-policy')).toContain("default-src 'none'");
    expect(answer.headers.get('content-security-policy')).toContain("frame-ancestors 'none'");
    expect(answer.headers.get('x-content-type-options')).toBe('nosniff');
    expect(answer.headers.get('cross-origin-resource-policy')).toBe('same-origin');
    expect(answer.headers.get('access-control-allow-origin')).toBeNull();
    expect((await answer.text()).length).toBeGreaterThan(10);
    const head = await fetch(stage.url + path, { method: 'HEAD' });
    expect([head.status, await head.text()]).toEqual([200, '']);
    for (const method of ['POST', 'PUT', 'DELETE', 'PATCH', 'OPTIONS']) {
      const refused = await fetch(stage.url + path, { method });
      expect(refused.status, `${method} ${path}`).toBe(405);
      expect(refused.headers.get('allow')).toBe('GET, HEAD');
    }
  }
  expect((await fetch(`${stage.url}events`, { method: 'HEAD' })).status).toBe(200);
  for (const path of ['nothing', 'etc/passwd', '%2e%2e%2fetc', 'metrics/', 'events/x'])
    expect((await fetch(stage.url + path)).status, path).toBe(404);
});

test('healthz tells of the loop, not of the plant', async () => {
  stage = await openStage({ data: testFolder() });
  const alive = await fetch(`${stage.url}healthz`);
  expect(await alive.json()).toMatchObject({ alive: true, status: 'no-bundle' });
  // Nobody pulses this page: it looks on at a gateway whose loop it is never told of.
  let now = 0;
  const log = { debug() {}, info() {}, warn() {}, error() {} };
  const after = (ms: number, work: () => void): (() => void) => {
    const timer = setTimeout(work, ms);
    return () => clearTimeout(timer);
  };
  const gateway = { watcher: null, status: 'running' } as unknown as ConstructorParameters<typeof Page>[0];
  const still = new Page(gateway, { clock: { wall: () => now, monotonic: () => now, after }, log });
  await still.open({ host: '127.0.0.1', port: 0, tries: 1 });
  now = 9999;
  expect((await fetch(`${still.url}healthz`)).status).toBe(200);
  now = 10_000;
  const dead = await fetch(`${still.url}healthz`);
  expect(dead.status).toBe(503);
  expect(await dead.json()).toMatchObject({ alive: false, pulse_age_s: 10 });
  await still.close();
});

test('a foreign name, a body, a flood of headers, a header that never ends, nonsense: refused, and the line closed', async () => {
  stage = await openStage({ data: testFolder(), limits: { headerMs: 200 } });
  const cases: readonly (readonly [string, string])[] = [
    ['HTTP/1.1 421', 'GET / HTTP/1.1\r\nHost: evil.example\r\n\r\n'],
    ['HTTP/1.1 400', 'GET / HTTP/1.1\r\nHost: localhost\r\nContent-Length: 900000000\r\n\r\nxx'],
    ['HTTP/1.1 400', 'GET / HTTP/1.1\r\nHost: localhost\r\nTransfer-Encoding: chunked\r\n\r\nff\r\n'],
    ['HTTP/1.1 400', 'GET / HTTP/1.1\r\n\r\n'],
    ['HTTP/1.1 400', `${'\u0001'.repeat(50)}\r\n\r\n`],
    ['HTTP/1.1 431', `GET / HTTP/1.1\r\nHost: localhost\r\nX: ${'x'.repeat(20_000)}\r\n\r\n`],
    ['HTTP/1.1 408', 'GET / HTTP/1.1\r\nHost: localhost\r\nX-Slow: '],
  ];
  for (const [status, words] of cases) {
    const heard = dial(stage.url, words);
    await until(`${status} to ${JSON.stringify(words.slice(0, 60))}`, () => heard.isClosed);
    expect(heard.text.slice(0, status.length)).toBe(status);
  }
  expect((await fetch(stage.url)).status).toBe(200);
});

test('more requests than the budget are refused, then it goes on', async () => {
  stage = await openStage({ data: testFolder(), limits: { requests: { burst: 5, perSecond: 10 } } });
  const statuses = await Promise.all(Array.from({ length: 12 }, async () => (await fetch(stage!.url)).status));
  expect(statuses.filter((status) => status === 200).length).toBeGreaterThanOrEqual(5);
  expect(statuses).toContain(429);
  await expect.poll(async () => (await fetch(stage!.url)).status).toBe(200);
});

test('more connections than are taken do not keep the rest from being served', async () => {
  stage = await openStage({ data: testFolder() });
  const idle = Array.from({ length: 60 }, () => dial(stage!.url, 'GET'));
  await until('the surplus cut', () => idle.filter(({ isClosed }) => isClosed).length >= 60 - 32);
  for (const { socket } of idle) socket.destroy();
  await expect.poll(async () => (await fetch(`${stage!.url}healthz`).catch(() => ({ status: 0 }))).status).toBe(200);
});

test('an answer that is not taken ends after its time', async () => {
  const bytes = 64 * 1024 * 1024;
  const routes = new Map([['/', () => ({ status: 200, type: 'text/plain', body: new Uint8Array(bytes) })]]);
  const server = new PageServer({ host: '127.0.0.1', port: 0, tries: 1 }, routes, systemClock, { answerMs: 100 });
  const port = await server.listen('127.0.0.1', 0);
  const heard = dial(`http://127.0.0.1:${port}/`, '');
  heard.socket.pause();
  // More than the system keeps on the way.
  heard.socket.write(get('/'));
  // Both timers are of this process: the server's is over when this one is.
  await new Promise((resolve) => setTimeout(resolve, 500));
  heard.socket.resume();
  await until('closed', () => heard.isClosed);
  expect(heard.text.startsWith('HTTP/1.1 200')).toBe(true);
  expect(heard.text.length).toBeLessThan(bytes);
  await server.close(0);
});

test('a port in use is said and tried again; by default the next ones are taken', async () => {
  stage = await openStage({ data: testFolder() });
  const port = Number(new URL(stage.url).port);
  const log: string[] = [];
  const take = (text: string): void => void log.push(text);
  const lines = { debug: take, info: take, warn: take, error: take };
  const waits: (() => void)[] = [];
  const clock = {
    wall: Date.now,
    monotonic: () => performance.now(),
    after: (_: number, work: () => void) => {
      waits.push(work);
      return () => {};
    },
  };
  const gateway = { watcher: null, status: 'running' } as unknown as ConstructorParameters<typeof Page>[0];
  const second = new Page(gateway, { clock, log: lines });
  await second.open({ host: '127.0.0.1', port, tries: 1 });
  expect(second.url).toBeNull();
  expect(log.join()).toMatch(/cannot listen on 127\.0\.0\.1:\d+ \(in use by another program\); forecasts go on/);
  await stage.page.close();
  waits.shift()!();
  await until('listening at last', () => second.url !== null);
  const third = new Page(gateway, { clock, log: lines });
  await third.open({ host: '127.0.0.1', port, tries: 16 });
  expect(Number(new URL(third.url!).port)).toBeGreaterThan(port);
  const open = new Page(gateway, { clock, log: lines });
  await open.open({ host: '0.0.0.0', port: await freePort(), tries: 1 });
  expect(log.at(-1)).toMatch(/0\.0\.0\.0 can be reached by other machines/);
  await Promise.all([second.close(), third.close(), open.close()]);
});
