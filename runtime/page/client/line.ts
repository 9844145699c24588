/** The line to the gateway: events come in, silence is noticed, and it is tried again until it holds. */
import type { News, Pulse, Snapshot } from '../told.ts';

/** Who hears of it. */
export interface Listener {
  all(snapshot: Snapshot): void;
  news(news: News): void;
  pulse(pulse: Pulse): void;
  /** Another page took the place of this one. */
  displaced(): void;
  stopped(): void;
}

const RETRY_MS = 5000;

/** See the file head. */
export class Line {
  readonly #listener: Listener;
  #source: EventSource | null = null;
  #retry = 0;

  constructor(listener: Listener) {
    this.#listener = listener;
  }

  open(): void {
    this.#source?.close();
    window.clearTimeout(this.#retry);
    const source = new EventSource('events');
    this.#source = source;
    const hear = (name: string, take: (data: string) => void): void =>
      source.addEventListener(name, (event) => take((event as MessageEvent<string>).data));
    hear('all', (data) => this.#listener.all(JSON.parse(data) as Snapshot));
    hear('tick', (data) => this.#listener.news(JSON.parse(data) as News));
    hear('pulse', (data) => this.#listener.pulse(JSON.parse(data) as Pulse));
    hear('stopped', () => this.#listener.stopped());
    hear('displaced', () => {
      source.close();
      this.#listener.displaced();
    });
    source.addEventListener('error', () => {
      // A browser gives up on any answer but 200; a gateway that starts again may give one.
      if (source.readyState === EventSource.CLOSED) this.#retry = window.setTimeout(() => this.open(), RETRY_MS);
    });
  }
}
