/**
 * One desk process, wired up: store, bundle folder, broker. Runs until it is told to stop; what it has committed by then
 * stays, what it has not the gateways still have.
 */
import { existsSync, statSync } from 'node:fs';
import { topicsOf } from '@stillwell/protocol';
import type { Connection } from '@stillwell/runtime/mqtt';
import { checkBroker, clientIdFor, connectBroker, subscribeTo } from '../broker.ts';
import { TrainError } from '../errors.ts';
import { Collector, type DeskEvent } from './collect.ts';
import { Shelf } from './shelf.ts';
import { openStore, readMeta, type Store, writeMeta } from './store/open.ts';

/** What a desk tells, with its own comings and goings. */
export type RunEvent = DeskEvent | { readonly event: 'connection'; readonly state: string; readonly detail: string };

/** Where a desk keeps, listens and tells. */
export interface DeskOptions {
  readonly data: string;
  readonly broker: string;
  /** Folder of sealed bundles; null: only those already in the store. */
  readonly bundles: string | null;
  readonly root: string;
  readonly onEvent: (event: RunEvent) => void;
  readonly bundleCheckMs?: number;
  readonly connectTimeoutMs?: number;
}

/** A desk at work. */
export interface RunningDesk {
  readonly store: Store;
  readonly collector: Collector;
  /** Takes in what has arrived, then closes store and connection. */
  stop(): Promise<void>;
}

/** Seconds the broker keeps what arrives while the desk is away; beyond, the gateways send again by themselves. */
const SESSION_SECONDS = 3600;
const BUNDLE_CHECK_MS = 2000;

/**
 * Starts a desk.
 *
 * throws  TrainError 'file' for a bundle folder that is none, 'archive' for the store, 'broker' when it cannot connect
 */
export async function startDesk(options: DeskOptions): Promise<RunningDesk> {
  const { bundles, bundleCheckMs = BUNDLE_CHECK_MS } = options;
  if (bundles !== null && !(existsSync(bundles) && statSync(bundles).isDirectory())) {
    throw new TrainError('file', `--bundles ${bundles}: expected a folder of sealed bundles (.swb), found none`);
  }
  checkBroker(options.broker);
  const store = await openStore(options.data);
  try {
    const shelf = new Shelf(store, bundles);
    const link = await openLink(options, store, shelf);
    const timer = setInterval(() => void link.collector.refresh(), bundleCheckMs);
    return {
      store,
      collector: link.collector,
      stop: async () => {
        clearInterval(timer);
        await link.collector.settle();
        await link.connection.end();
        // What came in between is committed too; its receipt is given at the next start.
        await link.collector.settle();
        await store.close();
      },
    };
  } catch (error) {
    await store.close();
    throw error;
  }
}

async function openLink(options: DeskOptions, store: Store, shelf: Shelf) {
  const { root, onEvent } = options;
  let connection: Connection | null = null;
  let opened: (connection: Connection) => void = () => {};
  // A kept session speaks before the connect is known here; its receipts wait for that instead of being lost.
  const open = new Promise<Connection>((resolve) => {
    opened = resolve;
  });
  const collector = new Collector({
    store,
    shelf,
    root,
    onEvent,
    publish: async (topic, payload) => (await open).publish({ topic, payload, qos: 1, retain: false }),
  });
  await collector.refresh(true);
  connection = await connectBroker({
    url: options.broker,
    clientId: await ownClientId(store),
    sessionExpirySeconds: SESSION_SECONDS,
    ...(options.connectTimeoutMs === undefined ? {} : { connectTimeoutMs: options.connectTimeoutMs }),
    onMessage: (topic, payload) => void collector.offer(topic, payload),
    // Until the first connect the refusal itself tells what is wrong.
    onState: (event) => {
      if (connection !== null || event.kind === 'connected') onEvent({ event: 'connection', ...connectionText(event) });
    },
  });
  opened(connection);
  // MQTT 5 lets several desks share one fleet; 3.1.1 knows no shared subscription.
  const filter = topicsOf(root, '+').segments;
  await subscribeTo(connection, [connection.protocol === 5 ? `$share/desk/${filter}` : filter]);
  try {
    await collector.repeatReceipts();
  } catch (cause) {
    // A desk without a store must not stay on the line and take what it cannot keep.
    await connection.end(true);
    throw cause;
  }
  return { connection, collector };
}

/** Kept in the store: the broker then holds back what arrives while this desk restarts. */
async function ownClientId(store: Store): Promise<string> {
  const kept = await readMeta(store.db, 'client-id');
  if (kept !== null) return kept;
  const made = clientIdFor('desk');
  await writeMeta(store.db, 'client-id', made);
  return made;
}

function connectionText(event: Parameters<NonNullable<Parameters<typeof connectBroker>[0]['onState']>>[0]) {
  switch (event.kind) {
    case 'connected':
      return { state: event.kind, detail: `MQTT ${event.protocol === 5 ? '5' : '3.1.1'}` };
    case 'lost':
      return { state: event.kind, detail: `${event.reason}; next attempt in ${(event.retryMs / 1000).toFixed(1)} s` };
    case 'refused-subscription':
      return { state: event.kind, detail: `${event.filter}: ${event.reason}` };
    case 'taken-over':
      return { state: event.kind, detail: `by another client, ${event.count} times` };
  }
}
