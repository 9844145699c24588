/** One signal: its value and state, the time ahead in numbers, the chart, its limits. */
import { Chart } from './chart.ts';
import { el, say, set, show } from './dom.ts';
import { letterText, limitLines, type Outlook } from './outlook.ts';
import type { Plant } from './plant.ts';
import { agoText, numberText, rangeText, spanText, unitText } from './words.ts';
import type { Zone } from './zone.ts';

/** Parts of the horizon whose forecast is said in numbers. */
const LEADS = [0.25, 0.5, 1] as const;
/** Of a chart, in CSS pixels; a single one has room. */
const HEIGHT = 176;
const ALONE_HEIGHT = 300;
/** Of fewer readings a share says nothing. */
const FEWEST_KEPT = 20;
/** Bounds that held so many fewer of 100 readings are worth a word; a few fewer is luck. */
const SHORT_BY = 15;

/** See the file head. */
export class Card {
  readonly node = el('article', 'card');
  readonly #signal: number;
  readonly #letter = el('span', 'letter');
  readonly #value = el('b');
  readonly #age = el('span', 'age');
  readonly #reason = el('p', 'reason');
  readonly #leads = LEADS.map(() => ({ head: el('th'), median: el('td', 'median'), bounds: el('td') }));
  readonly #holder = el('div', 'chart-holder');
  readonly #readout = el('p', 'readout');
  readonly #limits = el('ul', 'limits');
  readonly #chart: Chart;
  #width = 0;
  #isSeen = false;
  #draw: (() => void) | null = null;

  constructor(signal: number, plant: Plant) {
    const { name, unit } = plant.site.signals[signal]!;
    this.#signal = signal;
    const id = cardId(signal);
    const title = el('h3', '', name);
    title.id = `${id}-name`;
    this.node.id = id;
    set(this.node, { 'aria-labelledby': title.id, tabindex: -1 });
    const height = plant.site.signals.length === 1 ? ALONE_HEIGHT : HEIGHT;
    this.#chart = new Chart(signal, name, height, (text) => say(this.#readout, text));
    this.#holder.append(this.#chart.node);
    const value = el('p', 'value', this.#value, ' ', el('span', 'unit', unitText(unit)));
    const head = el('header', '', el('div', 'name', title, this.#letter), el('div', 'now', value, this.#age));
    this.node.append(head, this.#reason, this.#table(name), this.#holder, this.#readout, this.#limits);
  }

  /** Fills in what is known; draws when it is in sight. isHeard  false: the gateway is silent */
  update(plant: Plant, zone: Zone, outlook: Outlook, isHeard: boolean): void {
    const signal = this.#signal;
    const { decimals } = plant.site.signals[signal]!;
    const isTrusted = outlook.reason === null && isHeard;
    say(this.#value, numberText(plant.latest(signal), decimals));
    say(this.#letter, letterText(outlook));
    show(this.#letter, letterText(outlook) !== '');
    set(this.#letter, { class: `letter ${outlook.letter ?? 'over'}` });
    set(this.node, { class: isTrusted ? 'card' : 'card untrusted' });
    say(this.#reason, outlook.reason === null ? keptText(plant, signal) : `${outlook.reason}.`);
    this.#fillLeads(plant);
    this.#fillLimits(plant, zone);
    this.#draw = () => this.#chart.draw(plant, zone, this.#width, isTrusted);
    if (this.#isSeen) this.#drawNow();
  }

  /** The one thing that changes by itself. nowMs  null where the time is not known */
  age(plant: Plant, nowMs: number | null): void {
    const last = plant.facts.signals[this.#signal]?.last_ms ?? null;
    if (last === null) say(this.#age, 'no reading yet');
    else say(this.#age, nowMs === null ? '' : `read ${agoText((nowMs - last) / 1000)}`);
  }

  /** Told when it comes into sight or leaves it. */
  seen(isSeen: boolean): void {
    this.#isSeen = isSeen;
    if (isSeen) this.#drawNow();
  }

  /** Told of its width, in CSS pixels. */
  resized(width: number): void {
    if (width === this.#width) return;
    this.#width = width;
    if (this.#isSeen) this.#drawNow();
  }

  /** Where the chart's width is measured. */
  get holder(): Element {
    return this.#holder;
  }

  #drawNow(): void {
    if (this.#width > 0) this.#draw?.();
  }

  #table(name: string): HTMLTableElement {
    const heads = ['when', 'forecast', 'bounds'].map((text) => headed(el('th', '', text), 'col'));
    const rows = this.#leads.map(({ head, median, bounds }) => el('tr', '', headed(head, 'row'), median, bounds));
    const caption = el('caption', 'unseen', `Forecast of ${name}`);
    return el('table', 'leads', caption, el('thead', 'unseen', el('tr', '', ...heads)), el('tbody', '', ...rows));
  }

  #fillLeads(plant: Plant): void {
    const { site } = plant;
    const { decimals } = site.signals[this.#signal]!;
    const ahead = plant.ahead(this.#signal);
    const horizon = ahead.length === 0 ? site.horizon : ahead.length;
    LEADS.forEach((share, k) => {
      const step = Math.max(1, Math.round(share * horizon));
      const { head, median, bounds } = this.#leads[k]!;
      const point = ahead[step - 1];
      say(head, `in ${spanText((step * site.tick_ms) / 1000)}`);
      say(median, numberText(point?.median, decimals));
      say(bounds, point === undefined ? '–' : rangeText(point.lower, point.upper, decimals));
    });
  }

  #fillLimits(plant: Plant, zone: Zone): void {
    const lines = limitLines(plant, this.#signal, zone);
    show(this.#limits, lines.length > 0);
    while (this.#limits.childElementCount > lines.length) this.#limits.lastElementChild!.remove();
    lines.forEach((line, k) => {
      const item = this.#limits.children[k] ?? this.#limits.appendChild(el('li'));
      say(item, line);
    });
  }
}

function headed(head: HTMLTableCellElement, scope: 'col' | 'row'): HTMLTableCellElement {
  head.scope = scope;
  return head;
}

/** Where a signal's card can be jumped to. */
export function cardId(signal: number): string {
  return `signal-${signal + 1}`;
}

/** How the bounds have held so far, where enough came to say so. */
function keptText(plant: Plant, signal: number): string {
  const { inside, of } = plant.kept(signal);
  const coverage = plant.forecast(signal)?.coverage;
  if (of < FEWEST_KEPT || coverage === undefined) return 'Good. Too little has come yet to tell how the bounds hold.';
  const meant = Math.round(coverage * 100);
  const held = Math.round((100 * inside) / of);
  if (held < meant - SHORT_BY)
    return `Bounds said beforehand held only ${held} of 100 readings of late; ${meant} are meant to.`;
  return `Good. Bounds said beforehand held ${held} of 100 readings (${meant} are meant to).`;
}
