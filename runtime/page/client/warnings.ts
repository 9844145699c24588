/** Warnings that are open, most likely first: which limit, how likely, when, and since when it is said. */
import { cardId } from './card.ts';
import { el, say, set } from './dom.ts';
import type { Plant } from './plant.ts';
import { chanceText, limitWord, numberText, spanText, withUnit } from './words.ts';
import type { Zone } from './zone.ts';

/** See the file head. */
export class WarningList {
  readonly node = el('section', 'warnings');
  readonly #list = el('ul');

  constructor() {
    const title = el('h2', 'unseen', 'Warnings');
    this.node.append(title, this.#list);
  }

  update(plant: Plant, zone: Zone): void {
    const { warnings } = plant.facts;
    const sorted = warnings.toSorted((a, b) => b.probability - a.probability);
    const lines = sorted.map((one) => ({ signal: one.signal, text: warningText(plant, one, zone) }));
    set(this.node, { class: lines.length === 0 ? 'warnings none' : 'warnings' });
    const count = Math.max(1, lines.length);
    while (this.#list.childElementCount > count) this.#list.lastElementChild!.remove();
    for (let k = 0; k < count; k++) {
      const item = this.#list.children[k] ?? this.#list.appendChild(el('li', '', el('a'), el('span')));
      const [link, words] = item.children;
      const line = lines[k];
      say(link!, line === undefined ? '' : line.signal);
      say(words!, line === undefined ? 'No warning is open.' : line.text);
      if (line === undefined) link!.removeAttribute('href');
      else set(link!, { href: `#${cardId(plant.site.signals.findIndex(({ name }) => name === line.signal))}` });
    }
  }
}

type Warning = Plant['facts']['warnings'][number];

function warningText(plant: Plant, warning: Warning, zone: Zone): string {
  const { site, newest } = plant;
  const { limit, value, probability, earliest_ms, likely_ms, latest_ms, crossed_ms, since_ms } = warning;
  const channel = site.signals.find(({ name }) => name === warning.signal);
  const nowMs = newest * site.tick_ms;
  const at = (ms: number): string => zone.near(ms, nowMs, site.tick_ms);
  const which = `${limitWord(limit)} ${withUnit(numberText(value, channel?.decimals ?? null), channel?.unit ?? '1')}`;
  const since = `said since ${at(since_ms)}`;
  if (crossed_ms !== null) return `has passed ${which} at ${at(crossed_ms)}; ${since}.`;
  const within = spanText((site.horizon * site.tick_ms) / 1000);
  const when = likely_ms === null ? '' : `, likely by ${at(likely_ms)}`;
  const early = earliest_ms === null ? '' : `, at the earliest ${at(earliest_ms)}`;
  const late = latest_ms === null ? '' : `, at the latest ${at(latest_ms)}`;
  return `will probably pass ${which}: ${chanceText(probability)} within ${within}${when}${early}${late}; ${since}.`;
}
