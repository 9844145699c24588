/** Live updates: everything first, then news once a tick, nobody waited for, seats shared. */
import { connect, type Socket } from 'node:net';
import { afterEach, expect, test } from 'vitest';
import type { News, Snapshot } from '../../../runtime/page/told.ts';
import { MOST_VIEWERS, Viewers } from '../../../runtime/page/viewers.ts';
import { testFolder } from '../../support/folder.ts';
import { FIRST_TICK, openStage, type PageStage } from '../../support/page-stage.ts';
import { until } from '../../support/until.ts';

const viewers: Socket[] = [];
let stage: PageStage | null = null;
afterEach(async () => {
  for (const socket of viewers.splice(0)) socket.destroy();
  await stage?.stop();
  stage = null;
});

interface Following {
  readonly socket: Socket;
  readonly events: { readonly name: string; readonly data: unknown }[];
  isClosed: boolean;
}

/** Follows as a browser does; reads events off the chunks of the body. */
function follow(url: string): Following {
  const socket = connect(Number(new URL(url).port), '127.0.0.1');
  viewers.push(socket);
  const following: Following = { socket, events: [], isClosed: false };
  let text = '';
  socket.setEncoding('utf8');
  socket.on('data', (piece) => {
    text += piece;
    // Lines of chunk lengths fall between events and are passed over.
    for (let match = EVENT.exec(text); match !== null; match = EVENT.exec(text)) {
      text = text.slice(match.index + match[0].length);
      following.events.push({ name: match[1]!, data: JSON.parse(match[2]!) });
    }
  });
  socket.on('error', () => {});
  socket.on('close', () => {
    following.isClosed = true;
  });
  socket.write('GET /events HTTP/1.1\r\nHost: localhost\r\n\r\n');
  return following;
}

const EVENT = /event: (\w+)\ndata: (.*)\n\n/;
const named = (following: Following, name: string): unknown[] =>
  following.events.filter((one) => one.name === name).map(({ data }) => data);

test('everything comes first, then what each tick brought; readings told are those that came', async () => {
  stage = await openStage({ data: testFolder(), signals: 2, input: true });
  stage.load();
  await stage.play(0, 60);
  const one = follow(stage.url);
  await until('everything', () => one.events.length > 0);
  const [all] = named(one, 'all') as [Snapshot];
  expect(all.site).toMatchObject({ site: 'marsh-lane', tick_ms: 60_000, horizon: 24, clock: 'readings' });
  expect(all.site.signals.map(({ name, decimals }) => [name, decimals])).toEqual([
    ['s1', 2],
    ['s2', 2],
  ]);
  expect(all.came.ticks).toEqual(Array.from({ length: 60 }, (_, n) => FIRST_TICK + n));
  expect(all.came.values).toHaveLength(3);
  const { recent } = stage.gateway.engine;
  for (const [c, values] of all.came.values.entries())
    expect(values).toEqual(all.came.ticks.map((tick) => recent.at(tick, c)));
  expect(all.forecasts.map(({ signal, median }) => [signal, median.length])).toEqual([
    ['s1', 24],
    ['s2', 24],
  ]);
  // One forecast a horizon is kept: of the first tick behind the warming-up, and of each 24 ticks later.
  expect(all.said.length).toBeGreaterThanOrEqual(2);
  for (let k = 1; k < all.said.length; k++)
    expect(all.said[k]!.tick - all.said[k - 1]!.tick).toBeGreaterThanOrEqual(24);
  expect(all.said[0]!.median[0]).toHaveLength(24);
  await stage.play(60, 66);
  const news = (): News[] => [...(named(one, 'tick') as News[])];
  await until('news of the last tick', () => news().some(({ came }) => came.ticks.includes(FIRST_TICK + 65)));
  expect(news().flatMap(({ came }) => came.ticks)).toEqual([60, 61, 62, 63, 64, 65].map((n) => FIRST_TICK + n));
  expect(Date.parse(news().at(-1)!.forecasts[0]!.origin)).toBe((FIRST_TICK + 65) * 60_000);
  stage.load(2);
  await stage.play(66, 68);
  await until('everything again, under another bundle', () =>
    (named(one, 'all') as Snapshot[]).some(({ facts }) => facts.bundle?.sequence === 2),
  );
  await stage.page.close();
  await until('stopped', () => named(one, 'stopped').length === 1 && one.isClosed);
});

test('between ticks viewers hear that the gateway lives', async () => {
  stage = await openStage({ data: testFolder() });
  const one = follow(stage.url);
  await until('a pulse', () => named(one, 'pulse').length > 0);
  expect(named(one, 'pulse')[0]).toMatchObject({ health: { status: 'no-bundle' }, facts: { bundle: null } });
});

test('who comes when all seats are taken gets the longest held; that one is told', async () => {
  stage = await openStage({ data: testFolder() });
  const seated: Following[] = [];
  for (let k = 0; k < MOST_VIEWERS + 2; k++) {
    seated.push(follow(stage.url));
    await until('seated', () => seated.at(-1)!.events.length > 0);
  }
  await until('two displaced', () =>
    seated.slice(0, 2).every((one) => named(one, 'displaced').length === 1 && one.isClosed),
  );
  expect(seated.slice(2).every((one) => named(one, 'displaced').length === 0 && !one.isClosed)).toBe(true);
});

/** A response that takes so many bytes and then no more. */
function stuck(room: number) {
  const seen: string[] = [];
  const response = {
    writableLength: 0,
    isDestroyed: false,
    writeHead() {},
    on() {},
    write(bytes: Uint8Array) {
      seen.push(Buffer.from(bytes).toString());
      room -= bytes.length;
      if (room < 0) response.writableLength += bytes.length;
      return room >= 0;
    },
    end() {},
    destroy() {
      response.isDestroyed = true;
    },
  };
  return { response, seen };
}

test('a viewer that does not read is passed over, told everything when it reads again, let go when it never does', () => {
  const seats = new Viewers();
  const { response, seen } = stuck(10);
  const bytes = (text: string): Uint8Array => Buffer.from(text);
  let made = 0;
  const all = (): Uint8Array => {
    made++;
    return bytes('everything');
  };
  seats.add(response as unknown as Parameters<Viewers['add']>[0], bytes('0123456789'), 0);
  seats.send({ news: bytes('news 1'), all }, 1000);
  for (let k = 2; k < 10; k++) seats.send({ news: bytes(`news ${k}`), all }, 1000 * k);
  seats.say(bytes('pulse'), 10_000);
  expect(seen).toEqual(['0123456789', 'news 1']);
  expect(made).toBe(0);
  response.writableLength = 0;
  seats.send({ news: bytes('news 10'), all }, 10_000);
  expect(seen.at(-1)).toBe('everything');
  expect(made).toBe(1);
  seats.send({ news: bytes('news 11'), all }, 31_000);
  expect(response.isDestroyed).toBe(true);
  expect(seats.count).toBe(0);
});

test('one that never reads holds up neither the others nor the loop', async () => {
  stage = await openStage({ data: testFolder(), signals: 8 });
  stage.load();
  await stage.play(0, 30);
  const idle = follow(stage.url);
  idle.socket.pause();
  const one = follow(stage.url);
  await stage.play(30, 60);
  await until('the last tick', () =>
    (named(one, 'tick') as News[]).some(({ came }) => came.ticks.includes(FIRST_TICK + 59)),
  );
});
