/**
 * Acknowledges QoS 1 messages when their taker is done with them. The MQTT library could wait too, but then takes no next
 * message meanwhile, so that a sync of the disk would be paid for each one. Here the library is told that the message has
 * QoS 0, and the acknowledgement is ours. They leave in the order in which the messages came (MQTT 5.0 4.6, 3.1.1 4.6).
 */

/** What the library hands over of a message; its `qos` is changed. */
export interface Arrived {
  readonly cmd: string;
  qos?: 0 | 1 | 2;
  readonly messageId?: number;
}

interface Owed {
  readonly messageId: number;
  isDone: boolean;
}

/** PUBACK without reason code and properties, which both versions read as success (MQTT 5.0 3.4.2.1). */
const PUBACK = 0x40;

/** Acknowledgements of one connection. */
export class Acknowledgements {
  readonly #send: (bytes: Uint8Array) => void;
  readonly #owed: Owed[] = [];
  readonly #byPacket = new WeakMap<object, Owed>();
  #isFlushing = false;

  /** send  puts bytes on the wire between two packets */
  constructor(send: (bytes: Uint8Array) => void) {
    this.#send = send;
  }

  /** Takes the acknowledgement of a packet upon us, before the library looks at it. */
  claim(packet: Arrived): void {
    if (packet.cmd !== 'publish' || packet.qos !== 1 || packet.messageId === undefined) return;
    const owed = { messageId: packet.messageId, isDone: false };
    this.#owed.push(owed);
    this.#byPacket.set(packet, owed);
    packet.qos = 0;
  }

  /** Whether a packet came at QoS 1, whatever it says now. */
  isOwed(packet: object): boolean {
    return this.#byPacket.has(packet);
  }

  /** Acknowledges a claimed packet as soon as `taken` has resolved; at once without it. */
  settle(packet: object, taken: Promise<void> | void): void {
    const owed = this.#byPacket.get(packet);
    if (owed === undefined) return;
    const done = (): void => {
      owed.isDone = true;
      this.#flushSoon();
    };
    if (taken instanceof Promise) void taken.then(done);
    else done();
  }

  /** Those that become due together leave in one write. */
  #flushSoon(): void {
    if (this.#isFlushing) return;
    this.#isFlushing = true;
    queueMicrotask(() => {
      this.#isFlushing = false;
      this.#flush();
    });
  }

  #flush(): void {
    let count = 0;
    while (this.#owed[count]?.isDone) count++;
    if (count === 0) return;
    const bytes = Buffer.alloc(4 * count);
    this.#owed.splice(0, count).forEach(({ messageId }, i) => {
      bytes[4 * i] = PUBACK;
      bytes[4 * i + 1] = 2;
      bytes.writeUInt16BE(messageId, 4 * i + 2);
    });
    this.#send(bytes);
  }
}
