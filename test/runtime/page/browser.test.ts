/// <reference lib="dom" />
/**
 * The page in Debian's Chromium: what it shows in each state, that it follows along, and that nothing is loaded, refused by its
 * policy or thrown. Skipped where Chromium is not installed.
 */
import { existsSync } from 'node:fs';
import { createRequire } from 'node:module';
import { afterAll, afterEach, beforeAll, describe, expect, test } from 'vitest';
import { testFolder } from '../../support/folder.ts';
import { FIRST_TICK, openStage, type PageStage, type StageChoice } from '../../support/page-stage.ts';

/** The part of the driver that is used here. */
interface Spot {
  first(): Spot;
  nth(at: number): Spot;
  count(): Promise<number>;
  waitFor(): Promise<void>;
  isVisible(): Promise<boolean>;
  focus(): Promise<void>;
  press(key: string): Promise<void>;
  textContent(): Promise<string | null>;
  allTextContents(): Promise<string[]>;
  getAttribute(name: string): Promise<string | null>;
}
interface Tab {
  goto(url: string): Promise<unknown>;
  locator(selector: string): Spot;
  addInitScript(script: () => void): Promise<unknown>;
  evaluate<T>(script: () => T): Promise<T>;
  on(event: 'pageerror', hear: (error: Error) => void): void;
  on(event: 'console', hear: (message: { type(): string; text(): string }) => void): void;
  on(event: 'request', hear: (request: { url(): string }) => void): void;
}
interface Context {
  newPage(): Promise<Tab>;
  close(): Promise<void>;
}
interface Browser {
  newContext(options: object): Promise<Context>;
  close(): Promise<void>;
}
interface Driver {
  readonly chromium: { launch(options: object): Promise<Browser> };
}

const CHROMIUM = '/usr/bin/chromium';
const driver = ((): Driver | null => {
  try {
    return createRequire(import.meta.url)('playwright-core') as Driver;
  } catch {
    return null;
  }
})();
const isMissing = driver === null || !existsSync(CHROMIUM);
if (driver === null) console.warn('the page in a browser: skipped, playwright-core is not installed (npm ci)');
else if (isMissing)
  console.warn('the page in a browser: skipped, chromium is not installed (apt-get install chromium)');
/** No request of the browser's own, and no sandbox, which a container's root cannot have. */
const ARGS = [
  ...['--no-sandbox', '--disable-gpu', '--disable-quic', '--no-first-run'],
  ...['--disable-background-networking', '--disable-component-update', '--disable-sync'],
];
const DESK = { width: 1280, height: 900 };
const PHONE = { width: 360, height: 740 };

let browser: Browser;
let stage: PageStage | null = null;
let context: Context | null = null;
/** What went wrong in the browser, and where it went. */
let faults: string[] = [];
const foreign: string[] = [];

async function open(choice: Partial<StageChoice> = {}): Promise<PageStage> {
  stage = await openStage({ data: testFolder(), signals: 3, ...choice });
  return stage;
}

async function look(size = DESK, colorScheme: 'light' | 'dark' = 'light'): Promise<Tab> {
  await context?.close();
  context = await browser.newContext({ viewport: size, colorScheme, reducedMotion: 'reduce' });
  const tab = await context.newPage();
  tab.on('pageerror', (error) => faults.push(error.message));
  tab.on('console', (message) => {
    if (message.type() === 'error' || message.type() === 'warning') faults.push(message.text());
  });
  tab.on('request', (request) => {
    if (!request.url().startsWith(stage!.url) && !request.url().startsWith('data:')) foreign.push(request.url());
  });
  // Whatever a policy refuses is told to the document.
  await tab.addInitScript(() => {
    document.addEventListener('securitypolicyviolation', (event) => console.error(`refused: ${event.blockedURI}`));
  });
  await tab.goto(stage!.url);
  await tab.locator('.card').first().waitFor();
  return tab;
}

const text = async (tab: Tab, selector: string): Promise<string> =>
  (await tab.locator(selector).first().textContent()) ?? '';

describe.skipIf(isMissing)('in Chromium', { timeout: 90_000 }, () => {
  beforeAll(async () => {
    browser = await driver!.chromium.launch({ executablePath: CHROMIUM, args: ARGS });
  });
  afterAll(() => browser?.close());
  afterEach(async () => {
    await context?.close();
    await stage?.stop();
    context = null;
    stage = null;
    expect(faults.splice(0)).toEqual([]);
    expect(foreign.splice(0)).toEqual([]);
  });

  test('running: values, forecasts, charts, the gateway; and it follows along', async () => {
    const { gateway, load, play } = await open();
    load();
    await play(0, 80);
    const tab = await look();
    expect(await text(tab, '.status')).toBe('Forecasts are running, all 3 signals good.');
    expect(await tab.locator('.card').count()).toBe(3);
    const valueNow = () => gateway.engine.recent.at(gateway.engine.serving!.tick, 0).toFixed(2);
    expect(await text(tab, '.value b')).toBe(valueNow());
    await expect.poll(() => tab.locator('.chart .readings').first().getAttribute('d')).toMatch(/^M[\d.]+ [\d.]+L/);
    expect(await tab.locator('.chart .band').first().getAttribute('d')).toMatch(/Z$/);
    expect(await tab.locator('.chart .said').first().getAttribute('d')).toMatch(/Z$/);
    expect(await text(tab, 'aside')).toContain(
      Buffer.from(gateway.engine.serving!.checked.digest).toString('hex').slice(0, 12),
    );
    expect(await text(tab, 'footer')).toContain('Advisory estimate. Not a safety function');
    const before = await tab.locator('.chart .median').first().getAttribute('d');
    await play(80, 83);
    await expect.poll(() => text(tab, '.value b')).toBe(valueNow());
    expect(await tab.locator('.chart .median').first().getAttribute('d')).not.toBe(before);
  });

  test('nothing moves when a tick is told', async () => {
    const { load, play } = await open({ input: true });
    load();
    await play(0, 80);
    const tab = await look();
    const places = () =>
      tab.evaluate(() =>
        [...document.querySelectorAll('h1, h2, h3, .chart-holder, table, dl, footer')].map((node) => {
          const { x, y, width, height } = node.getBoundingClientRect();
          return [x, y, width, height].map(Math.round).join(' ');
        }),
      );
    const first = await places();
    const ticks = () => text(tab, 'aside');
    for (let n = 80; n < 84; n++) {
      await stage!.play(n, n + 1);
      await expect.poll(ticks).toContain(`${n + 1} ticks closed`);
      expect(await places()).toEqual(first);
    }
  });

  test('without a bundle, warming up, stale, under a plan, with a warning: each is said', async () => {
    const { load, play, plant } = await open({ input: true, warmupTicks: 40, limit: 11 });
    await play(0, 10);
    const tab = await look();
    expect(await text(tab, '.status')).toBe('No bundle serves: nothing is forecast.');
    expect(await text(tab, '.letter')).toBe('F failure');
    load();
    await play(10, 20);
    await expect.poll(() => text(tab, '.status')).toBe('Warming up: 20 of 40 ticks: not yet to be relied on.');
    expect(await text(tab, '.letter')).toBe('C function check');
    expect(await tab.locator('.chart.untrusted').count()).toBe(3);
    await play(20, 60);
    await expect.poll(() => tab.locator('.chart.untrusted').count()).toBe(0);
    expect(await text(tab, '.inputs tbody')).toContain('what the past says of it');
    const start = new Date((FIRST_TICK + 58) * 60_000).toISOString();
    const plan = JSON.stringify({ start, step: '5min', values: [12, 20, 12, 20, 12, 20] });
    await plant.publish({ topic: 'plan/pump', payload: plan, qos: 1, retain: true });
    await expect.poll(() => text(tab, '.inputs tbody')).toContain('planned until 01:28');
    await play(60, 66, 's2');
    await expect.poll(() => text(tab, '#signal-2 .letter')).toBe('M maintenance required');
    expect(await text(tab, '#signal-2 .reason')).toMatch(/^No reading for \d+ ticks or more\.$/);
    const openNow = stage!.gateway.publisher.openWarnings;
    const said = await tab.locator('.warnings li').allTextContents();
    if (openNow.length === 0) expect(said).toEqual(['No warning is open.']);
    else expect(said.length).toBe(openNow.length);
  });

  test('a gateway that stops is missed, and found again', async () => {
    const { load, play, page } = await open();
    load();
    await play(0, 40);
    const port = Number(new URL(stage!.url).port);
    const tab = await look();
    expect(await tab.locator('.lost').isVisible()).toBe(false);
    await page.close();
    await expect.poll(() => text(tab, '.lost p')).toMatch(/^The gateway was stopped\. What stands here is old/);
    expect(await text(tab, '.heard')).toMatch(/^nothing heard for/);
    expect(await tab.locator('.chart.untrusted').count()).toBe(3);
    // The browser tells of every attempt that finds nobody.
    faults = [];
    const { Page } = await import('../../../runtime/page/page.ts');
    const { systemClock } = await import('../../../runtime/clock.ts');
    const lines = { debug() {}, info() {}, warn() {}, error() {} };
    const again = new Page(stage!.gateway, { clock: systemClock, log: lines });
    await again.open({ host: '127.0.0.1', port, tries: 1 });
    await expect.poll(() => tab.locator('.lost').isVisible(), { timeout: 20_000 }).toBe(false);
    expect(await text(tab, '.heard')).toMatch(/^live/);
    faults = [];
    await again.close();
  });

  test.each([1, 64])('on a phone nothing is wider than the screen, with %i signals', async (signals) => {
    const { load, play } = await open({ signals });
    load();
    await play(0, 8);
    for (const scheme of ['light', 'dark'] as const) {
      const tab = await look(PHONE, scheme);
      const [width, inner] = await tab.evaluate(() => [document.documentElement.scrollWidth, window.innerWidth]);
      expect(width).toBe(inner);
      expect(await tab.locator('.card').count()).toBe(signals);
    }
  });

  test('by keyboard: links to signals, and a walk through a chart’s time, told in words', async () => {
    const { load, play, gateway } = await open({ signals: 8 });
    load();
    await play(0, 60);
    const tab = await look();
    await tab.locator('.overview a').nth(5).press('Enter');
    expect(await tab.evaluate(() => window.location.hash)).toBe('#signal-6');
    const chart = tab.locator('#signal-6 .chart');
    await expect.poll(() => tab.locator('#signal-6 .readings').getAttribute('d')).not.toBeNull();
    await chart.focus();
    await chart.press('ArrowLeft');
    const { tick } = gateway.engine.serving!;
    const reading = gateway.engine.recent.at(tick - 1, 5).toFixed(2);
    await expect.poll(() => chart.getAttribute('aria-valuetext')).toContain(`reading ${reading}\u00a0m`);
    expect(await text(tab, '#signal-6 .readout')).toContain(`reading ${reading}`);
    await chart.press('End');
    expect(await chart.getAttribute('aria-valuetext')).toMatch(
      /^01:23 {2}forecast [\d.]+ \([\d.]+ to [\d.]+\)\u00a0m$/,
    );
    await chart.press('Escape');
    expect(await text(tab, '#signal-6 .readout')).toBe('');
  });

  test('colours of text stand out from their ground by 4.5 to 1 (WCAG 2.2, 1.4.3), light and dark', async () => {
    const { load, play } = await open({ input: true });
    load();
    await play(0, 30);
    await play(30, 36, 's2');
    for (const scheme of ['light', 'dark'] as const) {
      const tab = await look(DESK, scheme);
      await expect.poll(() => text(tab, '#signal-2 .letter')).toBe('M maintenance required');
      const low = await tab.evaluate(() => {
        // WCAG 2.2, definitions of relative luminance and contrast ratio.
        const channels = (color: string): number[] => (color.match(/[\d.]+/g) ?? []).map(Number);
        const luminance = (color: string): number => {
          const [r, g, b] = channels(color)
            .slice(0, 3)
            .map((c) => (c / 255 <= 0.04045 ? c / 255 / 12.92 : ((c / 255 + 0.055) / 1.055) ** 2.4));
          return 0.2126 * r! + 0.7152 * g! + 0.0722 * b!;
        };
        const groundOf = (node: Element | null): string => {
          for (let at = node; at !== null; at = at.parentElement) {
            const color = getComputedStyle(at).backgroundColor;
            if (channels(color)[3] !== 0) return color;
          }
          return 'rgb(255, 255, 255)';
        };
        const walker = document.createTreeWalker(document.body, NodeFilter.SHOW_TEXT);
        const found: string[] = [];
        for (let node = walker.nextNode(); node !== null; node = walker.nextNode()) {
          const holder = node.parentElement!;
          if (!node.textContent!.trim() || holder.closest('script, style, [hidden]') !== null) continue;
          const style = getComputedStyle(holder);
          const ink = luminance(holder.closest('svg') === null ? style.color : style.fill);
          const ground = luminance(groundOf(holder));
          const ratio = (Math.max(ink, ground) + 0.05) / (Math.min(ink, ground) + 0.05);
          if (ratio < 4.5) found.push(`${node.textContent!.trim()}: ${ratio.toFixed(2)}`);
        }
        return found;
      });
      expect(low, scheme).toEqual([]);
    }
  });
});
