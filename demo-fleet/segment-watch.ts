/**
 * Counts the segments that pass the broker, by content, and now and then sends one a second time, as any broker may that
 * promises "at least once".
 */
import { createHash } from 'node:crypto';
import { readSegmentHead } from '@stillwell/protocol';

/** What passed of one site. */
export interface SegmentCounts {
  /** Different segments. */
  segments: number;
  /** Their bytes and ticks. */
  bytes: number;
  ticks: number;
  /** Messages beyond the first of each segment, ours among them. */
  repeated: number;
  /** Messages we sent a second time. */
  doubled: number;
}

/** Listens to the segments topics of all sites. */
export class SegmentWatch {
  readonly bySite = new Map<string, SegmentCounts>();
  private readonly seen = new Set<string>();
  private readonly doubleEvery: number;
  private readonly publish: (topic: string, payload: Uint8Array) => void;

  constructor(doubleEvery: number, publish: (topic: string, payload: Uint8Array) => void) {
    this.doubleEvery = doubleEvery;
    this.publish = publish;
  }

  /** Takes one message in; throws what readSegmentHead throws. */
  hear(topic: string, payload: Uint8Array): void {
    const head = readSegmentHead(payload);
    const counts = this.bySite.get(head.site) ?? { segments: 0, bytes: 0, ticks: 0, repeated: 0, doubled: 0 };
    this.bySite.set(head.site, counts);
    const hash = createHash('sha256').update(payload).digest('hex');
    if (this.seen.has(hash)) {
      counts.repeated++;
      return;
    }
    this.seen.add(hash);
    counts.segments++;
    counts.bytes += payload.length;
    counts.ticks += head.ticks;
    if (this.doubleEvery > 0 && this.seen.size % this.doubleEvery === 0) {
      counts.doubled++;
      this.publish(topic, payload);
    }
  }
}
