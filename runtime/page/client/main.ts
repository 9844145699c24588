/** The page in the browser: joins the line to the gateway with what is shown. */
import type { Snapshot } from '../told.ts';
import { Card, cardId } from './card.ts';
import { el, say, set, show } from './dom.ts';
import { legend } from './legend.ts';
import { Line } from './line.ts';
import { needsLook, outlookOf } from './outlook.ts';
import { Overview } from './overview.ts';
import { Panel } from './panel.ts';
import { Plant } from './plant.ts';
import { statusText } from './status.ts';
import { WarningList } from './warnings.ts';
import { spanText } from './words.ts';
import { Zone } from './zone.ts';

/** The gateway speaks every five seconds at least: after three times that it is silent. */
const SILENT_SECONDS = 15;
const BEAT_MS = 1000;

/** Everything that is made anew when the site's facts change. */
interface View {
  readonly plant: Plant;
  readonly zone: Zone;
  readonly cards: readonly Card[];
  readonly overview: Overview;
  readonly panel: Panel;
  readonly warnings: WarningList;
}

const title = el('h1', '', 'Gateway');
const where = el('p', 'where');
const status = el('p', 'status', 'Waiting for the gateway …');
const heard = el('p', 'heard');
const lost = el('div', 'lost');
const lostText = el('p');
const again = el('button', '', 'Show live again');
const body = el('main');
let view: View | null = null;
let isDue = false;
let wasHeard = true;
let pageDigest = '';
let opened = performance.now();
let ending: 'displaced' | 'stopped' | null = null;

const line = new Line({
  all(snapshot) {
    if (pageDigest !== '' && pageDigest !== snapshot.page) window.location.reload();
    pageDigest = snapshot.page;
    ending = null;
    take(snapshot);
  },
  news(news) {
    view?.plant.news(news, performance.now());
    renderSoon();
  },
  pulse(pulse) {
    view?.plant.pulse(pulse, performance.now());
    renderSoon();
  },
  displaced: () => end('displaced'),
  stopped: () => end('stopped'),
});

const sight = new IntersectionObserver(
  (entries) => {
    for (const { target, isIntersecting } of entries)
      view?.cards.find((card) => card.node === target)?.seen(isIntersecting);
  },
  { rootMargin: '300px' },
);
const sizes = new ResizeObserver((entries) => {
  for (const { target, contentRect } of entries)
    view?.cards.find((card) => card.holder === target)?.resized(Math.floor(contentRect.width));
});

start();

function start(): void {
  set(status, { role: 'status' });
  set(lost, { role: 'alert' });
  show(again, false);
  again.addEventListener('click', () => {
    ending = null;
    opened = performance.now();
    line.open();
    beat();
  });
  lost.append(lostText, again);
  show(lost, false);
  const head = el('header', 'top', el('div', '', title, where), el('div', 'state', status, heard));
  document.getElementById('page')!.append(head, lost, body);
  window.setInterval(beat, BEAT_MS);
  line.open();
}

/** A snapshot of the same site goes into what is there; of another one, or another bundle's facts, everything is laid out anew. */
function take(snapshot: Snapshot): void {
  const plant = new Plant(snapshot, performance.now());
  const isSame = view !== null && JSON.stringify(view.plant.site) === JSON.stringify(plant.site);
  view = isSame ? { ...view!, plant } : layOut(plant);
  renderSoon();
}

function layOut(plant: Plant): View {
  const { site } = plant;
  sight.disconnect();
  sizes.disconnect();
  document.title = `${site.site}, ${site.gateway}`;
  say(title, site.site);
  say(where, `${site.class}, gateway ${site.gateway}. Advisory estimates, not a safety function.`);
  const cards = site.signals.map((_, i) => new Card(i, plant));
  const overview = new Overview(plant, renderSoon);
  const panel = new Panel();
  const warnings = new WarningList();
  const heading = el('h2', '', 'Signals');
  const list = el('div', `cards of-${Math.min(3, cards.length)}`, ...cards.map((card) => card.node));
  const bar = el('div', 'bar', heading, legend());
  const signals = el('section', 'signals', warnings.node, bar, overview.node, list);
  body.replaceChildren(signals, panel.node);
  for (const card of cards) {
    sight.observe(card.node);
    sizes.observe(card.holder);
  }
  return { plant, zone: new Zone(site.zone), cards, overview, panel, warnings };
}

/** One drawing a frame, whatever came. */
function renderSoon(): void {
  if (isDue) return;
  isDue = true;
  requestAnimationFrame(() => {
    isDue = false;
    render();
  });
}

function render(): void {
  if (view === null) return;
  const { plant, zone, cards, overview, panel, warnings } = view;
  const now = plant.now(performance.now());
  const isHeard = isLive();
  const outlooks = cards.map((_, i) => outlookOf(plant, i, now));
  cards.forEach((card, i) => {
    card.update(plant, zone, outlooks[i]!, isHeard);
    show(card.node, !overview.isFiltered || needsLook(outlooks[i]!) || location.hash === `#${cardId(i)}`);
  });
  overview.update(outlooks);
  warnings.update(plant, zone);
  panel.update(plant, zone, now);
  say(status, statusText(plant, outlooks));
  set(status, { class: `status ${plant.health.quality ?? 'good'}` });
  beat();
}

function isLive(): boolean {
  return ending === null && (view?.plant.silence(performance.now()) ?? 0) < SILENT_SECONDS;
}

function end(why: 'displaced' | 'stopped'): void {
  ending = why;
  renderSoon();
}

/** Once a second: ages, and whether anything was heard. */
function beat(): void {
  const monotonic = performance.now();
  const silent = (view === null ? monotonic - opened : view.plant.silence(monotonic) * 1000) / 1000;
  const isHeard = ending === null && silent < SILENT_SECONDS;
  if (isHeard !== wasHeard) {
    wasHeard = isHeard;
    document.body.classList.toggle('silent', !isHeard);
    renderSoon();
  }
  show(lost, !isHeard);
  show(again, ending === 'displaced');
  if (!isHeard) say(lostText, lostWords(ending, view !== null));
  const now = view?.plant.now(monotonic) ?? null;
  const time = view === null || now === null ? '' : `, ${view.zone.day(now)} ${view.zone.clock(now, 1)}`;
  say(heard, view === null || !isHeard ? `nothing heard for ${spanText(silent)}` : `live${time}`);
  if (view === null) return;
  for (const card of view.cards) card.age(view.plant, now);
}

/** The same words as long as it lasts: they are read aloud when they change. */
function lostWords(why: typeof ending, hasSeen: boolean): string {
  if (why === 'displaced')
    return 'Other pages have taken this one’s place, as a gateway serves only a few. What stands here is no longer live.';
  const old = hasSeen ? ' What stands here is old: do not go by it.' : '';
  if (why === 'stopped') return `The gateway was stopped.${old} This page goes on when it starts again.`;
  return `Nothing is heard from the gateway.${old} This page keeps trying.`;
}
