/** Pages of several sites in one process: a port each, kept by a site that starts anew. */
import { expect, test } from 'vitest';
import { systemClock } from '../../../runtime/clock.ts';
import { Pages } from '../../../runtime/page/pages.ts';
import { freePort } from '../../support/broker.ts';
import { until } from '../../support/until.ts';

type Gateway = Parameters<Pages['take']>[0];

/** Only what a page reads of a gateway that nobody asks anything but its health. */
function gatewayOf(site: string): Gateway {
  return { watcher: null, status: 'running', config: { site: { site } } } as unknown as Gateway;
}

test('each site has a page of its own, the same again after it has started anew', async () => {
  const log = { debug() {}, info() {}, warn() {}, error() {} };
  const port = await freePort();
  const pages = new Pages({ host: '127.0.0.1', port, tries: 16 }, { clock: systemClock, log });
  const first = gatewayOf('mill-lane');
  pages.take(first);
  pages.take(gatewayOf('marsh-lane'));
  await until('two pages', () => pages.urls.length === 2);
  const [mill, marsh] = pages.urls;
  expect(mill).not.toBe(marsh);
  const again = gatewayOf('mill-lane');
  pages.take(again);
  await until('again where it was', () => pages.urls.length === 2 && pages.urls[0] === mill);
  expect(again.watcher).not.toBeNull();
  for (const url of pages.urls) expect((await fetch(`${url}healthz`)).status).toBe(200);
  await pages.close();
  expect(pages.urls).toEqual([]);
  await expect(fetch(`${marsh}healthz`)).rejects.toThrow();
});
