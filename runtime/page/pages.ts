/**
 * One page for each site of a process, on ports that follow each other in the order of the sites. A site that fails and starts
 * anew has its page again, on the port it had.
 */
import type { Gateway } from '../gateway.ts';
import type { PageAddress } from './address.ts';
import { Page, type PagePorts } from './page.ts';

interface Place {
  readonly address: PageAddress;
  page: Page | null;
}

/** See the file head. */
export class Pages {
  readonly #first: PageAddress;
  readonly #ports: PagePorts;
  readonly #places = new Map<string, Place>();

  /** first  where the first site's page listens */
  constructor(first: PageAddress, ports: PagePorts) {
    this.#first = first;
    this.#ports = ports;
  }

  /** Gives a gateway that has just started its page. */
  take(gateway: Gateway): void {
    const { site } = gateway.config.site;
    const { host, port, tries } = this.#first;
    const isAny = port === 0;
    const place = this.#places.get(site) ?? {
      address: { host, port: isAny ? 0 : port + this.#places.size, tries },
      page: null,
    };
    this.#places.set(site, place);
    const before = place.page;
    const page = new Page(gateway, this.#ports);
    place.page = page;
    void this.#open(place, page, before);
  }

  /** Where the pages are, in the order of the sites. */
  get urls(): readonly string[] {
    return [...this.#places.values()].flatMap(({ page }) => page?.url ?? []);
  }

  /** Tells all viewers that the gateways stop, and ends. */
  async close(): Promise<void> {
    await Promise.all([...this.#places.values()].map(({ page }) => page?.close()));
  }

  async #open({ address }: Place, page: Page, before: Page | null): Promise<void> {
    const was = before?.url ?? null;
    await before?.close();
    const port = was === null ? address.port : Number(new URL(was).port);
    await page.open(was === null ? address : { ...address, port, tries: 1 });
  }
}
