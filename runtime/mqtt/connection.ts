/**
 * One lasting connection to an MQTT broker, and the only caller of the MQTT client library.
 *
 * Each attempt is a client of its own with the library's own reconnecting off: a fresh client has empty stores (nothing
 * is resent behind our back, nothing waits in memory), a refused CONNACK cannot end it for good, and one timer of ours
 * spreads the attempts. Publishing works only while connected and a failed publish means "unknown": whoever must not
 * lose a message keeps it on disk and offers it again. Not a queue, and never proof that anybody received anything.
 */
import { type IClientOptions, MqttClient, UniqueMessageIdProvider } from 'mqtt';
import { RuntimeError } from '../errors.ts';
import { Acknowledgements } from './acknowledge.ts';
import { backOffMs, TAKE_OVERS_TO_A_FIGHT, truceMs } from './back-off.ts';
import { openStream, parseBrokerUrl } from './stream.ts';
import { asBuffer, plainReason, publishOptions, willOptions } from './translate.ts';
import type { Connection, ConnectionOptions, Outgoing } from './types.ts';

export { parseBrokerUrl, shownBroker } from './stream.ts';
export type { Connection, ConnectionEvent, ConnectionOptions, IncomingPacket, Outgoing, Will } from './types.ts';

const DEFAULT_KEEP_ALIVE_SECONDS = 30;
const DEFAULT_MAX_PACKET_BYTES = 1024 * 1024;
const CONNECT_TIMEOUT_MS = 15_000;
/** Fixed header, properties and packet id around topic and payload, generously. */
const PACKET_OVERHEAD_BYTES = 128;
const OWN_WINDOW = 16;
/** Messages that an MQTT 5 broker may leave unacknowledged with us; without a word it may be 65,535, all counted as queued. */
const RECEIVE_MAXIMUM = 100;
/** Two that fight for a client id meet within minutes; what came by longer ago is no fight. */
const TAKE_OVERS_WITHIN_MS = 3_600_000;
/** A connection that held so long was a good one. */
const STABLE_MS = 10_000;
/** Reason codes of MQTT 5 (2.4) and return codes of 3.1.1 (3.2.2.3). */
const UNSUPPORTED_VERSION = new Set([1, 132]);
const SESSION_TAKEN_OVER = 142;

/** Opens a connection that keeps itself up until `end`. */
export function openConnection(options: ConnectionOptions): Connection {
  return new LastingConnection(options);
}

interface Waiter {
  resolve(): void;
  reject(error: RuntimeError): void;
}

class LastingConnection implements Connection {
  readonly #options: ConnectionOptions;
  readonly #address: ReturnType<typeof parseBrokerUrl>;
  readonly #maxPacketBytes: number;
  readonly #subscriptions = new Map<string, { qos: 0 | 1; waiters: Waiter[] }>();
  readonly #firstWaiters = new Set<Waiter>();
  /** Publishes under way on the present client. */
  readonly #pending = new Set<Waiter>();
  #client: MqttClient | null = null;
  #version: 4 | 5;
  #connectedVersion: 4 | 5 | null = null;
  #isConnected = false;
  /** Attempts in a row that failed or held less than STABLE_MS; the back-off grows with it. */
  #failures = 0;
  #connectedAt = 0;
  #shortLived = 0;
  #takeOvers = 0;
  #takenOverAt = 0;
  /** The present client's loss was a take-over. */
  #isTakenOver = false;
  #retry: NodeJS.Timeout | null = null;
  #ended = false;

  constructor(options: ConnectionOptions) {
    this.#options = options;
    this.#address = parseBrokerUrl(options.url);
    this.#maxPacketBytes = options.maxPacketBytes ?? DEFAULT_MAX_PACKET_BYTES;
    this.#version = options.protocol === 'auto' ? 5 : options.protocol;
    this.#attempt();
  }

  get isConnected(): boolean {
    return this.#isConnected;
  }

  get protocol(): 4 | 5 | null {
    return this.#connectedVersion;
  }

  get window(): number {
    return Math.min(OWN_WINDOW, this.#client?.serverProperties?.receiveMaximum ?? OWN_WINDOW);
  }

  get backlogBytes(): number {
    return this.#client?.stream.writableLength ?? 0;
  }

  publish(message: Outgoing): Promise<void> {
    const client = this.#client;
    if (!this.#isConnected || client === null)
      return Promise.reject(new RuntimeError('not-connected', `not connected to ${this.#where()}`));
    const size = Buffer.byteLength(message.topic) + Buffer.byteLength(message.payload) + PACKET_OVERHEAD_BYTES;
    const limit = Math.min(client.serverProperties?.maximumPacketSize ?? this.#maxPacketBytes, this.#maxPacketBytes);
    if (size > limit)
      return Promise.reject(
        new RuntimeError('too-large', `message on ${message.topic}: ${size} bytes, ${this.#where()} takes ${limit}`),
      );
    return new Promise((resolve, reject) => {
      const waiter: Waiter = { resolve, reject };
      this.#pending.add(waiter);
      client.publish(message.topic, asBuffer(message.payload), publishOptions(message, this.#version), (error) => {
        if (!this.#pending.delete(waiter)) return;
        if (error) reject(this.#brokerError(`message on ${message.topic} not taken`, error));
        else resolve();
      });
    });
  }

  subscribe(filters: readonly string[], qos: 0 | 1 = 1, patienceMs = Number.POSITIVE_INFINITY): Promise<void> {
    const granted = filters.map(
      (filter) =>
        new Promise<void>((resolve, reject) => {
          const entry = this.#subscriptions.get(filter) ?? { qos, waiters: [] };
          entry.waiters.push({ resolve, reject });
          this.#subscriptions.set(filter, { ...entry, qos });
        }),
    );
    if (this.#isConnected) this.#request(filters);
    const all = Promise.all(granted).then(() => undefined);
    if (patienceMs === Number.POSITIVE_INFINITY) return all;
    return new Promise((resolve, reject) => {
      const timer = setTimeout(() => reject(this.#silent('to subscribing', patienceMs)), patienceMs);
      all.then(resolve, reject).finally(() => clearTimeout(timer));
    });
  }

  firstConnect(timeoutMs: number): Promise<void> {
    if (this.#connectedVersion !== null) return Promise.resolve();
    return new Promise((resolve, reject) => {
      const timer = setTimeout(() => {
        this.#firstWaiters.delete(waiter);
        waiter.reject(this.#silent('to connecting', timeoutMs));
      }, timeoutMs);
      const waiter: Waiter = {
        resolve: () => {
          clearTimeout(timer);
          resolve();
        },
        reject: (error) => {
          clearTimeout(timer);
          reject(error);
        },
      };
      this.#firstWaiters.add(waiter);
    });
  }

  async end(force = false): Promise<void> {
    this.#ended = true;
    if (this.#retry) clearTimeout(this.#retry);
    const client = this.#client;
    this.#client = null;
    const wasConnected = this.#isConnected;
    this.#isConnected = false;
    if (client) {
      if (force || !wasConnected) client.stream.destroy();
      await new Promise<void>((resolve) => {
        const patience = setTimeout(() => {
          client.stream.destroy();
          resolve();
        }, 1000);
        client.end(force || !wasConnected, () => {
          clearTimeout(patience);
          resolve();
        });
      });
    }
    this.#failWaiters(new RuntimeError('not-connected', `connection to ${this.#where()} was closed`));
  }

  #where(): string {
    return `${this.#address.secure ? 'mqtts' : 'mqtt'}://${this.#address.host}:${this.#address.port}`;
  }

  /** One client, from connecting to its loss. Handlers stand before the first byte: a kept session speaks at once. */
  #attempt(): void {
    this.#retry = null;
    const version = this.#version;
    let reason = 'connection closed by the broker';
    let answered = false;
    let over = false;
    const client = new MqttClient(
      () => openStream(this.#address, this.#options.tls ?? {}, this.#maxPacketBytes),
      this.#clientOptions(version),
    );
    this.#client = client;
    const acknowledgements = new Acknowledgements((bytes) => {
      if (!over && client.stream.writable) client.stream.write(bytes);
    });
    client.on('packetreceive', (packet) => acknowledgements.claim(packet));
    client.handleMessage = (packet, done) => {
      const taken = this.#options.onMessage?.(packet.topic, new Uint8Array(asBuffer(packet.payload)), {
        qos: acknowledgements.isOwed(packet) ? 1 : packet.qos,
        retain: packet.retain,
        duplicate: packet.dup,
        responseTopic: packet.properties?.responseTopic ?? null,
        correlationData: packet.properties?.correlationData ?? null,
      });
      acknowledgements.settle(packet, taken);
      done();
    };
    client.on('error', (error) => {
      reason = plainReason(error);
      const code = (error as { code?: unknown }).code;
      if (typeof code === 'number') answered = true;
      if (this.#options.protocol === 'auto' && UNSUPPORTED_VERSION.has(code as number)) {
        this.#version = version === 5 ? 4 : 5;
        // From the older one back to the newer only after a wait: a broker that takes neither must not be hammered.
        reason = version === 5 ? 'unsupported-version' : 'it takes neither MQTT 5 nor 3.1.1';
      }
    });
    client.on('disconnect', (packet) => {
      reason = `broker said goodbye, reason code ${packet.reasonCode ?? 0}`;
      if (packet.reasonCode === SESSION_TAKEN_OVER) this.#noteTakeOver();
    });
    client.on('connect', (packet) => {
      answered = true;
      this.#onConnect(version, packet.sessionPresent);
    });
    client.stream.once('close', () => {
      if (over) return;
      over = true;
      clearTimeout(deadline);
      client.end(true);
      // Some old brokers hang up on an unknown version without a CONNACK.
      if (!answered && this.#options.protocol === 'auto' && reason === 'connection closed by the broker')
        this.#version = version === 5 ? 4 : 5;
      if (this.#client === client) this.#onLoss(reason, answered);
    });
    const deadline = setTimeout(() => {
      if (!client.connected) client.stream.destroy();
    }, CONNECT_TIMEOUT_MS + 5000);
    deadline.unref();
  }

  #clientOptions(version: 4 | 5): IClientOptions {
    const { will, sessionExpirySeconds = 0 } = this.#options;
    const username = this.#options.username ?? this.#address.username;
    const password = this.#options.password ?? this.#address.password;
    return {
      clientId: this.#options.clientId,
      protocolVersion: version,
      clean: sessionExpirySeconds === 0,
      keepalive: this.#options.keepAliveSeconds ?? DEFAULT_KEEP_ALIVE_SECONDS,
      connectTimeout: CONNECT_TIMEOUT_MS,
      reconnectPeriod: 0,
      resubscribe: false,
      queueQoSZero: false,
      // Otherwise the library keeps a buffer for each of the 65,536 numbers a header may hold: 10 MB for nothing.
      writeCache: false,
      messageIdProvider: new UniqueMessageIdProvider(),
      ...(username === null ? {} : { username }),
      ...(password === null ? {} : { password }),
      ...(version === 5
        ? {
            properties: {
              sessionExpiryInterval: sessionExpirySeconds,
              maximumPacketSize: this.#maxPacketBytes,
              receiveMaximum: RECEIVE_MAXIMUM,
            },
          }
        : {}),
      ...(will ? { will: willOptions(will, version) } : {}),
    };
  }

  #onConnect(version: 4 | 5, sessionPresent: boolean): void {
    this.#isConnected = true;
    this.#connectedVersion = version;
    this.#connectedAt = performance.now();
    this.#request([...this.#subscriptions.keys()]);
    for (const waiter of this.#firstWaiters) waiter.resolve();
    this.#firstWaiters.clear();
    this.#options.onState?.({ kind: 'connected', protocol: version, sessionPresent });
  }

  #onLoss(reason: string, answered: boolean): void {
    if (this.#isConnected) {
      const isShort = performance.now() - this.#connectedAt < STABLE_MS;
      this.#shortLived = isShort ? this.#shortLived + 1 : 0;
      // The first loss after a good connection, or a single short one, is met with the smallest wait.
      if (!isShort || this.#shortLived === 1) this.#failures = 0;
    }
    this.#isConnected = false;
    for (const waiter of this.#pending)
      waiter.reject(new RuntimeError('broker', `connection to ${this.#where()} lost before the answer`));
    this.#pending.clear();
    if (this.#ended) return;
    if (reason === 'unsupported-version') {
      this.#attempt();
      return;
    }
    const { firstMs = 5000, capMs = 60_000 } = this.#options.backOff ?? {};
    const random = (this.#options.random ?? Math.random)();
    const truce = this.#isTakenOver ? truceMs(this.#takeOvers, random) : 0;
    this.#isTakenOver = false;
    const retryMs = Math.max(truce, backOffMs(this.#failures, { firstMs, capMs }, random));
    this.#failures++;
    const silentFallBack =
      !answered && this.#version === 4 && this.#options.protocol === 'auto' && this.#failures === 1;
    if (!silentFallBack) {
      const advice = reason.includes('; check ') ? '' : "; check that address and port are a broker's, and its log";
      const error = new RuntimeError('broker', `broker ${this.#where()}: ${reason}${advice}`);
      for (const waiter of this.#firstWaiters) waiter.reject(error);
      this.#firstWaiters.clear();
    }
    const { clientId } = this.#options;
    const isShort = this.#shortLived >= TAKE_OVERS_TO_A_FIGHT;
    const hint =
      truce > 0
        ? `: another client uses the client id "${clientId}"; stop one of the two`
        : isShort
          ? `, ${this.#shortLived} times in a row just after connecting; does another client use the client id "${clientId}"?`
          : '';
    this.#options.onState?.({ kind: 'lost', reason: reason + hint, retryMs });
    this.#retry = setTimeout(() => this.#attempt(), retryMs);
  }

  #noteTakeOver(): void {
    const now = performance.now();
    this.#takeOvers = now - this.#takenOverAt > TAKE_OVERS_WITHIN_MS ? 1 : this.#takeOvers + 1;
    this.#takenOverAt = now;
    this.#isTakenOver = true;
    this.#options.onState?.({ kind: 'taken-over', count: this.#takeOvers });
  }

  /** Asks for the filters one by one in one packet each, so that a refused one does not hide the others. */
  #request(filters: readonly string[]): void {
    const client = this.#client;
    if (client === null) return;
    for (const filter of filters) {
      const entry = this.#subscriptions.get(filter);
      if (!entry) continue;
      client.subscribe(filter, { qos: entry.qos }, (error, granted) => {
        const refused = granted?.some((grant) => grant.qos >= 128) ?? false;
        if (error && !refused && !client.connected) return; // asked again after the reconnect
        const waiters = entry.waiters.splice(0);
        if (!error && !refused) {
          for (const waiter of waiters) waiter.resolve();
          return;
        }
        const reason = error ? plainReason(error) : 'not authorised';
        for (const waiter of waiters)
          waiter.reject(
            new RuntimeError('broker', `broker ${this.#where()} refused to subscribe ${filter}: ${reason}`),
          );
        this.#options.onState?.({ kind: 'refused-subscription', filter, reason });
      });
    }
  }

  #silent(what: string, patienceMs: number): RuntimeError {
    return new RuntimeError(
      'broker',
      `broker ${this.#where()}: no answer ${what} within ${patienceMs / 1000} s; check that address and port are a broker's`,
    );
  }

  #brokerError(what: string, cause: Error): RuntimeError {
    return new RuntimeError('broker', `broker ${this.#where()}: ${what}: ${plainReason(cause)}`, { cause });
  }

  #failWaiters(error: RuntimeError): void {
    for (const waiter of [...this.#pending, ...this.#firstWaiters]) waiter.reject(error);
    this.#pending.clear();
    this.#firstWaiters.clear();
    for (const entry of this.#subscriptions.values())
      for (const waiter of entry.waiters.splice(0)) waiter.reject(error);
  }
}
