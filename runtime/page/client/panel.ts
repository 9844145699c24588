/** The gateway itself: bundle, line, record, clock, machine; and what its inputs are planned to do. */
import { el, say, show } from './dom.ts';
import type { Plant } from './plant.ts';
import { agoText, bytesText, counted, numberText, spanText, withUnit } from './words.ts';
import type { Zone } from './zone.ts';

const ROWS = ['Bundle', 'Made', 'Broker', 'Record', 'Waiting', 'Clock', 'Readings', 'Refused', 'Machine'] as const;
type Row = (typeof ROWS)[number];

/** See the file head. */
export class Panel {
  readonly node: HTMLElement;
  readonly #rows = new Map(ROWS.map((name) => [name, el('dd')]));
  readonly #inputs = el('tbody');
  readonly #inputsBox: HTMLElement;

  constructor() {
    const list = el('dl');
    for (const [name, value] of this.#rows) list.append(el('div', '', el('dt', '', name), value));
    const heads = ['input', 'now', 'ahead'].map((text) => {
      const head = el('th', '', text);
      head.scope = 'col';
      return head;
    });
    const table = el('table', 'inputs', el('thead', '', el('tr', '', ...heads)), this.#inputs);
    const title = el('h2', '', 'The gateway');
    title.id = 'gateway';
    this.#inputsBox = el('section', 'panel', el('h2', '', 'Inputs'), table);
    const links = el(
      'p',
      'links',
      'For scripts: ',
      link('/state.json', 'state.json'),
      ' ',
      link('/metrics', 'metrics'),
    );
    this.node = el('aside', '', this.#inputsBox, el('section', 'panel', title, list, links));
  }

  update(plant: Plant, zone: Zone, nowMs: number | null): void {
    const { facts, health, site } = plant;
    const put = (row: Row, text: string): void => say(this.#rows.get(row)!, text);
    const { bundle, link: line, spool } = facts;
    put(
      'Bundle',
      bundle === null
        ? 'none serves'
        : `${bundle.digest.slice(0, 12)}, number ${bundle.sequence}, ${bundle.kind}, ${bytesText(bundle.bytes)}`,
    );
    put('Made', bundle === null ? '–' : zone.date(bundle.made_ms));
    put('Broker', brokerText(line));
    put('Record', facts.disk_fault === null ? recordText(plant) : `nothing is kept on disk: ${facts.disk_fault}`);
    const oldest = spool.oldest_s === null ? '' : `, the oldest from ${agoText(spool.oldest_s)}`;
    put(
      'Waiting',
      spool.waiting === 0
        ? 'no segment waits for the desk'
        : `${counted(spool.waiting, 'segment', 'segments')} for the desk, ${bytesText(spool.bytes)} of ${bytesText(spool.most_bytes)}${oldest}`,
    );
    put('Clock', clockText(plant, zone, nowMs));
    const { counters } = health;
    put(
      'Readings',
      `${counters.readings} taken, ${counters.late} late; ${counted(counters.ticks, 'tick', 'ticks')} closed`,
    );
    const refused = Object.entries(counters.refused);
    put('Refused', refused.length === 0 ? 'none' : refused.map(([cause, n]) => `${n} ${cause}`).join(', '));
    const delay = facts.loop_delay_s >= 0.05 ? `, at times ${spanText(facts.loop_delay_s)} late` : '';
    put(
      'Machine',
      `${bytesText(facts.memory_bytes)} of memory, up for ${spanText(facts.up_s)}${delay}; version ${site.version}`,
    );
    this.#fillInputs(plant, zone);
  }

  #fillInputs(plant: Plant, zone: Zone): void {
    const { inputs, signals, tick_ms } = plant.site;
    show(this.#inputsBox, inputs.length > 0);
    const outlooks = plant.forecast(0)?.inputs_ahead ?? [];
    inputs.forEach((input, u) => {
      const row = this.#inputs.children[u] ?? this.#inputs.appendChild(el('tr', '', rowHead(), el('td'), el('td')));
      const [name, now, ahead] = row.children;
      const outlook = outlooks.find((one) => one.input === input.name);
      say(name!, input.name);
      say(now!, withUnit(numberText(plant.latest(signals.length + u), input.decimals), input.unit));
      say(ahead!, outlook === undefined ? '–' : aheadText(outlook, zone, plant.newest * tick_ms, tick_ms));
    });
  }
}

type Forecast = NonNullable<ReturnType<Plant['forecast']>>;
type InputOutlook = NonNullable<Forecast['inputs_ahead']>[number];

function aheadText(outlook: InputOutlook, zone: Zone, nowMs: number, tickMs: number): string {
  const { use, plan_until, plan_age_s, plan_error, usual_error, unit } = outlook;
  if (use === 'held') return 'its last value is led on';
  if (use === 'expected') return 'what the past says of it';
  const until = plan_until === null ? '' : ` until ${zone.near(Date.parse(plan_until), nowMs, tickMs)}`;
  const age = plan_age_s === null ? '' : `, made ${agoText(plan_age_s)}`;
  if (plan_error === null) return `planned${until}${age}`;
  const usual = usual_error === null ? '' : `; ${withUnit(String(usual_error), unit)} is usual without a plan`;
  return `planned${until}${age}; off by ${withUnit(String(plan_error), unit)} on average${usual}`;
}

function brokerText({ connected, for_s, protocol, reconnects, reason }: Plant['facts']['link']): string {
  const version = protocol === null ? '' : `, MQTT ${protocol}`;
  const lost = reconnects === 0 ? 'never lost' : `lost ${counted(reconnects, 'time', 'times')}`;
  if (connected) return `connected for ${spanText(for_s)}${version}; ${lost}`;
  return `not connected for ${spanText(for_s)}${reason === null ? '' : `: ${reason}`}`;
}

function recordText({ health }: Plant): string {
  const { segments_confirmed: confirmed } = health.counters;
  return `kept on disk; ${counted(confirmed, 'segment', 'segments')} safe at the desk`;
}

function clockText({ site, facts }: Plant, zone: Zone, nowMs: number | null): string {
  const time = nowMs === null ? 'no time yet' : `${zone.day(nowMs)} ${zone.clock(nowMs, 1)}`;
  const by =
    site.clock === 'readings'
      ? 'by the readings’ own times'
      : facts.clock_set
        ? 'by this machine’s clock'
        : 'by the readings, since this machine’s clock was never set';
  return `${time} in ${zone.name}, ${by}`;
}

function rowHead(): HTMLTableCellElement {
  const head = el('th');
  head.scope = 'row';
  return head;
}

function link(href: string, text: string): HTMLAnchorElement {
  const node = el('a', '', text);
  node.href = href;
  return node;
}
