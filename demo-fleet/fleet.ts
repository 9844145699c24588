/**
 * The fleet at run time: broker, desk and gateways as real processes, and one connection of the demo's own that publishes
 * what the plants say and listens to what the gateways answer.
 */
import { randomBytes } from 'node:crypto';
import { join } from 'node:path';
import {
  type ForecastMessage,
  type ForecastsMessage,
  type HealthMessage,
  parseForecastMessage,
  parseForecastsMessage,
  parseHealthMessage,
  parseTopic,
  parseWarningMessage,
  topicsOf,
} from '@stillwell/protocol';
import { type Connection, openConnection } from '@stillwell/runtime/mqtt';
import { type Broker, startBroker } from './broker.ts';
import { Processes, type Running, residentMiB } from './processes.ts';
import { SegmentWatch } from './segment-watch.ts';
import { WarningWatch } from './warning-watch.ts';

/** First level of the gateways' topics. */
export const ROOT = 'stillwell';

/** What one gateway is started with. */
export interface GatewayStart {
  readonly site: string;
  readonly siteFile: string;
  readonly trust: string;
  readonly bundle: string | null;
  readonly segmentTicks: number;
}

/** One site as `stillwell desk status --json` tells it; the part the demo reads. */
export interface DeskSite {
  readonly site: string;
  readonly segments: number;
  readonly doubled: number;
  readonly conflicts: number;
  readonly waitingForBundle: number;
  readonly waitingForPredecessor: number;
  readonly broken: number;
  readonly brokenReason: string | null;
  readonly refused: number;
  readonly readings: number;
  readonly bitsPerReading: number | null;
  readonly corrections: number;
}

/** Where a fleet keeps its logs, and whom it tells what it hears. */
export interface FleetOptions {
  readonly folder: string;
  /** Every how many-th segment message is sent a second time, as a broker may; 0 for none. */
  readonly doubleEvery: number;
  readonly onForecasts: (site: string, message: ForecastsMessage) => void;
  /** Site and signal whose own forecast messages are listened to as well; none unless given. */
  readonly closely?: { readonly site: string; readonly signal: string; readonly hear: (one: ForecastMessage) => void };
  readonly onUnexpectedEnd: (name: string, detail: string) => void;
}

/** As the gateway's own command starts it: small heap, small pool. */
const SMALL_BOX = ['--max-semi-space-size=1', '--v8-pool-size=1', '--expose-gc'];
const CONNECT_TIMEOUT_MS = 15_000;

/** Broker, desk and gateways of one demo run. */
export class Fleet {
  readonly broker: Broker;
  readonly processes: Processes;
  readonly segments: SegmentWatch;
  readonly warnings = new WarningWatch();
  /** Last health heard of each site. */
  readonly health = new Map<string, HealthMessage>();
  /** Largest resident memory seen of each gateway, MiB. */
  readonly memory = new Map<string, number>();
  private readonly options: FleetOptions;
  private readonly connection: Connection;
  private readonly gateways = new Map<string, Running>();
  private readonly watch: NodeJS.Timeout;
  private desk: Running | null = null;
  /** What could not be read of what the gateways publish; must stay empty. */
  readonly unreadable: string[] = [];

  private constructor(options: FleetOptions, broker: Broker) {
    this.options = options;
    this.broker = broker;
    this.processes = new Processes(join(options.folder, 'logs'));
    this.processes.onUnexpectedEnd = options.onUnexpectedEnd;
    this.segments = new SegmentWatch(options.doubleEvery, (topic, payload) => {
      void this.connection.publish({ topic, payload, qos: 1, retain: false }).catch(() => {});
    });
    this.connection = openConnection({
      url: broker.url,
      clientId: `demo-${randomBytes(4).toString('hex')}`,
      protocol: 4,
      onMessage: (topic, payload) => this.hear(topic, payload),
    });
    this.watch = setInterval(() => this.weigh(), 1000);
  }

  /** Starts the broker and the demo's own connection; logs of the children go to `folder`. */
  static async open(options: FleetOptions): Promise<Fleet> {
    const fleet = new Fleet(options, await startBroker());
    await fleet.connection.firstConnect(CONNECT_TIMEOUT_MS);
    const { forecastAll, health, segments, warning } = topicsOf(ROOT, '+');
    const { closely } = options;
    const one = closely === undefined ? [] : [topicsOf(ROOT, closely.site).forecast(closely.signal)];
    await fleet.connection.subscribe([forecastAll, health, segments, warning('+'), ...one], 1);
    return fleet;
  }

  /** Publishes one reading. */
  publish(topic: string, payload: string): Promise<void> {
    return this.connection.publish({ topic, payload, qos: 1, retain: false });
  }

  /** Publishes what whoever comes later must find as well, such as a plan. */
  publishRetained(topic: string, payload: string): Promise<void> {
    return this.connection.publish({ topic, payload, qos: 1, retain: true });
  }

  /** The desk's data folder. */
  get archiveFolder(): string {
    return join(this.options.folder, 'desk');
  }

  startDesk(bundleFolder: string): void {
    this.desk = this.processes.start('desk', 'stillwell', [
      'desk',
      ...['--data', this.archiveFolder],
      ...['--broker', this.broker.url],
      ...['--bundles', bundleFolder],
    ]);
  }

  /** The desk goes away as at the end of a working day; gateways keep their segments meanwhile. */
  async stopDesk(): Promise<void> {
    await this.desk?.stop();
    this.desk = null;
  }

  /** Starts a site's gateway, or starts it again on the same data folder. */
  startGateway(start: GatewayStart): void {
    const args = [
      'run',
      ...['--site', start.siteFile],
      ...['--data', join(this.options.folder, 'gateways', start.site)],
      ...['--broker', this.broker.url],
      ...['--trust', start.trust],
      ...['--gateway', `${start.site}-gateway`],
      ...['--clock', 'readings'],
      ...['--segment-ticks', String(start.segmentTicks)],
      ...['--health-seconds', '2'],
      ...(start.bundle === null ? [] : ['--bundle', start.bundle]),
    ];
    this.gateways.set(start.site, this.processes.start(`gateway-${start.site}`, 'stillwell-gateway', args, SMALL_BOX));
  }

  /** Cuts a gateway's power. */
  async killGateway(site: string): Promise<void> {
    await this.gateways.get(site)?.kill();
  }

  /** Stops a gateway as its service manager would. */
  async stopGateway(site: string): Promise<number | null> {
    return (await this.gateways.get(site)?.stop()) ?? null;
  }

  /** Cuts every connection that names the site; gives how many. */
  cutLink(site: string): number {
    const named = this.broker.clients().filter((clientId) => clientId.includes(site));
    for (const clientId of named) this.broker.cut(clientId);
    return named.length;
  }

  /** What the desk holds, by its own command. */
  async deskStatus(): Promise<readonly DeskSite[]> {
    return JSON.parse(
      await this.processes.run('stillwell', ['desk', 'status', '--data', this.archiveFolder, '--json']),
    );
  }

  /** Waits until every segment that passed the broker for a site is decoded at the desk, and the gateway holds none back. */
  async untilArchived(site: string, seconds: number): Promise<void> {
    const deadline = performance.now() + seconds * 1000;
    for (;;) {
      const sent = this.segments.bySite.get(site)?.segments ?? 0;
      const waiting = this.health.get(site)?.counters.segments_waiting ?? 0;
      const held = (await this.deskStatus()).find((one) => one.site === site);
      const undecoded = (held?.waitingForBundle ?? 0) + (held?.waitingForPredecessor ?? 0);
      if (sent > 0 && waiting === 0 && held !== undefined && held.segments >= sent && undecoded === 0) return;
      if (performance.now() > deadline)
        throw new Error(
          `${site}: expected all ${sent} segments decoded at the desk within ${seconds} s, got ${held?.segments ?? 0} with ` +
            `${undecoded} undecoded, ${waiting} still at the gateway`,
        );
      await new Promise((resolve) => setTimeout(resolve, 250));
    }
  }

  /** Waits for a site's health to satisfy a condition. */
  async untilHealth(
    site: string,
    wanted: string,
    test: (message: HealthMessage) => boolean,
    seconds: number,
  ): Promise<void> {
    const deadline = performance.now() + seconds * 1000;
    while (performance.now() < deadline) {
      const message = this.health.get(site);
      if (message !== undefined && test(message)) return;
      await new Promise((resolve) => setTimeout(resolve, 50));
    }
    throw new Error(
      `${site}: expected ${wanted} within ${seconds} s, last health was ${this.health.get(site)?.status ?? 'never heard'}`,
    );
  }

  /** Ends everything that was started. */
  async close(): Promise<void> {
    clearInterval(this.watch);
    await this.processes.stopAll();
    await this.connection.end();
    await this.broker.stop();
  }

  private hear(topic: string, payload: Uint8Array): void {
    const parsed = parseTopic(ROOT, topic);
    if (parsed === null) return;
    try {
      if (parsed.kind === 'forecastAll') this.options.onForecasts(parsed.site, parseForecastsMessage(payload));
      else if (parsed.kind === 'forecast') this.options.closely?.hear(parseForecastMessage(payload));
      else if (parsed.kind === 'warning') {
        // Blanked: none is open any more.
        if (payload.length > 0) this.warnings.hear(parseWarningMessage(payload));
      } else if (parsed.kind === 'health') {
        this.health.set(parsed.site, parseHealthMessage(payload));
      } else if (parsed.kind === 'segments') this.segments.hear(topic, payload);
    } catch (error) {
      this.unreadable.push(`${topic}: ${(error as Error).message}`);
    }
  }

  private weigh(): void {
    for (const [site, gateway] of this.gateways) {
      const now = residentMiB(gateway.pid);
      if (now !== null) this.memory.set(site, Math.max(now, this.memory.get(site) ?? 0));
    }
  }
}
