/** All signals at a look: one small link each, marked where somebody should look; and a box to leave the others out. */
import { cardId } from './card.ts';
import { el, say, set, show } from './dom.ts';
import { needsLook, type Outlook } from './outlook.ts';
import type { Plant } from './plant.ts';
import { chanceText, counted, limitWord } from './words.ts';

/** From so many signals on there is something to find one's way in. */
const WORTH_FROM = 5;
/** More are folded up where the screen is small. */
const MOST_UNFOLDED = 16;

/** See the file head. */
export class Overview {
  readonly node = el('nav', 'overview');
  readonly #summary = el('summary');
  readonly #box = el('input');
  readonly #boxText = el('span');
  readonly #links: { readonly link: HTMLAnchorElement; readonly mark: HTMLElement }[];
  readonly #isWorth: boolean;

  /** onFilter  the box was ticked or unticked */
  constructor(plant: Plant, onFilter: () => void) {
    const { signals } = plant.site;
    this.#isWorth = signals.length >= WORTH_FROM;
    set(this.node, { 'aria-label': 'Signals' });
    const list = el('ul');
    this.#links = signals.map(({ name }, i) => {
      const mark = el('span', 'mark');
      const link = el('a', '', el('span', '', name), mark);
      link.href = `#${cardId(i)}`;
      list.append(el('li', '', link));
      return { link, mark };
    });
    this.#box.type = 'checkbox';
    this.#box.addEventListener('change', onFilter);
    const fold = el('details', '', this.#summary, list);
    fold.open = signals.length <= MOST_UNFOLDED || window.matchMedia('(min-width: 700px)').matches;
    this.node.append(fold, el('label', 'filter', this.#box, this.#boxText));
    show(this.node, this.#isWorth);
  }

  /** Whether only those that need a look are wanted. */
  get isFiltered(): boolean {
    return this.#isWorth && this.#box.checked;
  }

  update(outlooks: readonly Outlook[]): void {
    outlooks.forEach((outlook, i) => {
      const { link, mark } = this.#links[i]!;
      say(mark, markText(outlook));
      set(link, { class: needsLook(outlook) ? 'look' : '' });
    });
    const count = outlooks.filter(needsLook).length;
    say(this.#summary, `All ${outlooks.length} signals`);
    this.#box.disabled = count === 0 && !this.#box.checked;
    if (count === 0) say(this.#boxText, 'none needs a look');
    else
      say(
        this.#boxText,
        `only the ${counted(count, 'signal', 'signals')} that ${count === 1 ? 'needs' : 'need'} a look`,
      );
  }
}

function markText({ letter, reason, limit }: Outlook): string {
  if (letter !== null) return letter;
  if (reason !== null) return 'expired';
  return limit === null ? '' : `${limitWord(limit.limit)} ${chanceText(limit.probability)}`;
}
