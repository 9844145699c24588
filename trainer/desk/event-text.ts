/** What a desk tells, as lines for a person. */
import { momentText } from '../text-table.ts';
import type { RunEvent } from './run.ts';

/** One line, or null for what is only counted. */
export function eventLine(event: RunEvent): string | null {
  switch (event.event) {
    case 'segment':
      if (event.kind === 'refused') return `refused from ${event.site}: ${event.message}`;
      if (event.kind !== 'conflict') return null;
      return (
        `CONFLICT ${event.name.site} ${event.name.gateway}: segment ${event.name.number} came with other bytes than before; ` +
        'kept aside. Two gateways may share one identity (a copied card?)'
      );
    case 'chain':
      if (event.kind === 'broken')
        return `chain broken at ${event.site} ${event.gateway} segment ${event.number}: ${event.reason}`;
      return event.kind === 'waiting'
        ? `waits: ${event.site} ${event.gateway} segment ${event.number}, for its ${event.reason}`
        : null;
    case 'receipt':
      return null;
    case 'receipt-lost':
      return `receipt for ${event.site} not delivered (${event.message}); the gateway asks again`;
    case 'bundle':
      return `bundle ${event.digest.slice(0, 16)}… is known from now on`;
    case 'bundle-refused':
      return `${event.file}: no bundle: ${event.message}`;
    case 'not-kept':
      return `${event.dropped} segments not kept, no receipt sent: ${event.message}`;
    case 'failed':
      return `decoding failed: ${event.message}; what is kept stays kept, and is tried again within minutes`;
    case 'connection':
      return `broker: ${event.state}, ${event.detail}`;
  }
}

/** Counts since the start, for the status line. */
export class DeskCounts {
  #stored = 0;
  #copies = 0;
  #conflicts = 0;
  #refused = 0;
  #readings = 0;
  /** Of the segments these readings came from; others may wait, or have come in an earlier run. */
  #bytes = 0;
  #lastMs: number | null = null;
  readonly #sites = new Set<string>();

  count(event: RunEvent, nowMs: number): void {
    if (event.event === 'chain' && event.kind === 'decoded') {
      this.#readings += event.readings ?? 0;
      this.#bytes += event.size;
    }
    if (event.event !== 'segment') return;
    if (event.kind === 'refused') {
      this.#refused++;
      return;
    }
    this.#lastMs = nowMs;
    this.#sites.add(event.name.site);
    if (event.kind === 'stored') this.#stored++;
    else if (event.kind === 'copy') this.#copies++;
    else this.#conflicts++;
  }

  line(): string {
    const bits = this.#readings > 0 ? `, ${((this.#bytes * 8) / this.#readings).toFixed(2)} bits/reading` : '';
    return (
      `${this.#sites.size} sites, ${this.#stored} segments (${this.#copies} doubled, ${this.#conflicts} conflicts, ` +
      `${this.#refused} refused), ${this.#readings} readings${bits}, last ${momentText(this.#lastMs)}`
    );
  }
}
