/**
 * Who of a plant's Sparkplug nodes and devices is alive, and what their aliases mean. A birth gives names, datatypes and
 * aliases; those of an earlier one are forgotten. A death makes the values absent at once. Data before a birth are
 * refused: without it an alias means nothing. Messages of a node and its devices are numbered together, 0 to 255; missing
 * numbers are counted, and what follows is taken all the same, since nothing here ever asks for a birth: one lost message
 * must not silence a plant until somebody restarts it. An alias whose datatype has changed is refused, see member.ts.
 *
 * source  Sparkplug 3.0 (ISO/IEC 20237), 6.4.5 (sequence numbers), 6.4.19 to 6.4.26 (births, data, deaths)
 */
import { MAX_MESSAGE_BYTES } from '../limits.ts';
import type { ReadingTarget } from '../reading-target.ts';
import { Member, type MemberState, type SavedMember, type WantedMetric } from './member.ts';
import { metricNumber } from './metric.ts';
import { PayloadReader } from './payload.ts';
import type { SparkplugSource, SparkplugTopic } from './topic.ts';

/** A metric that the site file names, and where it comes from. */
export interface SparkplugRoute extends WantedMetric {
  readonly source: SparkplugSource;
}

/** Counted since the start. */
export interface SparkplugCounts {
  births: number;
  deaths: number;
  /** Times the numbers jumped, and the messages that were missing. */
  gaps: number;
  missed: number;
  /** Messages that came twice, and were passed over the second time. */
  repeated: number;
  unreadable: number;
}

/** What a restart goes on from. */
export interface SavedNode {
  readonly name: string;
  readonly birthNumber: number;
  readonly members: readonly (readonly [device: string | null, member: SavedMember])[];
}

/** How a channel's node or device stands. */
export interface SourceState {
  readonly state: MemberState;
  /** Whether the birth names the metric. */
  readonly isNamed: boolean;
}

const NUMBERS = 256;
/** Name of the metric that pairs a death with its birth (6.4.19, 6.4.25). */
const BIRTH_NUMBER = 'bdSeq';
const UINT64 = 8;

class Node {
  readonly self = new Member();
  readonly devices = new Map<string, Member>();
  /** Of the last message; -1: none yet. */
  seq = -1;
  timeMs = Number.NaN;
  birthNumber = -1;
  /** Births taken over from before a restart hold unless the first message after it is later than this. */
  trustedUntilMs = Number.POSITIVE_INFINITY;

  member(device: string | null): Member | undefined {
    return device === null ? this.self : this.devices.get(device);
  }

  want({ source, ...metric }: SparkplugRoute): void {
    let member = this.member(source.device);
    if (member === undefined) {
      member = new Member();
      this.devices.set(source.device!, member);
    }
    member.want(metric);
  }

  get members(): readonly (readonly [string | null, Member])[] {
    return [[null, this.self], ...this.devices];
  }
}

const nameOf = ({ group, node }: { group: string; node: string }): string => `${group}/${node}`;

/** See the file head. */
export class SparkplugSessions {
  readonly counts: SparkplugCounts = { births: 0, deaths: 0, gaps: 0, missed: 0, repeated: 0, unreadable: 0 };
  readonly #nodes = new Map<string, Node>();
  readonly #reader = new PayloadReader();
  /** Births and deaths so far: what `save` gives has changed when this has. */
  changes = 0;

  constructor(routes: readonly SparkplugRoute[]) {
    for (const route of routes) {
      const name = nameOf(route.source);
      const node = this.#nodes.get(name) ?? new Node();
      this.#nodes.set(name, node);
      node.want(route);
    }
  }

  /** Takes a message; false where it is of a node nobody asked for. */
  take(topic: SparkplugTopic, payload: Uint8Array, target: ReadingTarget): boolean {
    const node = this.#nodes.get(nameOf(topic));
    if (node === undefined) return false;
    const reader = this.#reader;
    if (payload.length > MAX_MESSAGE_BYTES || !reader.open(payload)) {
      this.counts.unreadable++;
      const reason = payload.length > MAX_MESSAGE_BYTES ? 'size' : 'syntax';
      const got = reason === 'size' ? payload.length : 'expected a Sparkplug B payload, got other bytes';
      node.member(topic.device)?.visit((channel) => target.refuse(channel, reason, '', got));
      return true;
    }
    if (topic.isKept) this.#kept(node, topic, reader);
    else this.#live(node, topic, reader, target);
    return true;
  }

  /** How every channel's node or device stands. */
  states(visit: (channel: number, state: SourceState) => void): void {
    for (const node of this.#nodes.values())
      for (const [, member] of node.members)
        member.visit((channel, _, datatype) => visit(channel, { state: member.state, isNamed: datatype !== 0 }));
  }

  /** Births heard so far, for `restore`. */
  save(): readonly SavedNode[] {
    return [...this.#nodes].map(([name, node]) => ({
      name,
      birthNumber: node.birthNumber,
      members: node.members.map(([device, member]) => [device, member.save()] as const),
    }));
  }

  /**
   * Goes on from births heard before; of nodes and devices still asked for.
   *
   * untilMs  a first message of a node later than this finds them forgotten: too much may have passed unheard
   */
  restore(saved: readonly SavedNode[], untilMs = Number.POSITIVE_INFINITY): void {
    for (const { name, birthNumber, members } of saved) {
      const node = this.#nodes.get(name);
      if (node === undefined) continue;
      node.birthNumber = birthNumber;
      node.trustedUntilMs = untilMs;
      for (const [device, member] of members) node.member(device)?.restore(member);
    }
  }

  #live(node: Node, topic: SparkplugTopic, reader: PayloadReader, target: ReadingTarget): void {
    if (reader.timeMs > node.trustedUntilMs) for (const [, member] of node.members) member.forget('unheard');
    node.trustedUntilMs = Number.POSITIVE_INFINITY;
    if (topic.type === 'NDEATH') {
      this.#nodeDeath(node, reader);
      return;
    }
    if (topic.type === 'NBIRTH') this.#beginNode(node, reader);
    else if (!this.#isNext(node, reader)) return;
    const member = node.member(topic.device);
    if (member === undefined) return;
    if (topic.type === 'NDATA' || topic.type === 'DDATA') {
      if (member.state !== 'alive') member.refuseAll(target);
      else reader.visit((metric) => member.data(metric, reader.timeMs, target));
    } else if (topic.type === 'DDEATH') {
      this.counts.deaths++;
      this.changes++;
      member.forget('gone');
    } else {
      this.#birth(member, reader, target);
    }
  }

  #birth(member: Member, reader: PayloadReader, target: ReadingTarget | null): void {
    this.counts.births++;
    this.changes++;
    member.beginBirth(reader.timeMs);
    reader.visit((metric) => member.born(metric, reader.timeMs, target));
  }

  /** A birth that the broker kept tells what aliases mean, not how things are now; it never stands above a live one. */
  #kept(node: Node, topic: SparkplugTopic, reader: PayloadReader): void {
    const member = node.member(topic.device);
    if (member === undefined || member.state === 'gone') return;
    if (member.state === 'alive' && !(reader.timeMs > member.bornMs)) return;
    if (topic.type === 'NBIRTH') node.birthNumber = birthNumberOf(reader);
    this.#birth(member, reader, null);
  }

  #beginNode(node: Node, reader: PayloadReader): void {
    node.seq = reader.seq;
    node.timeMs = reader.timeMs;
    node.birthNumber = birthNumberOf(reader);
    // Their births follow the node's (6.4.20).
    for (const device of node.devices.values()) device.forget('unheard');
  }

  /** A death of an earlier session, come late, says nothing of this one. */
  #nodeDeath(node: Node, reader: PayloadReader): void {
    const number = birthNumberOf(reader);
    if (number >= 0 && node.birthNumber >= 0 && number !== node.birthNumber) return;
    this.counts.deaths++;
    this.changes++;
    node.seq = -1;
    for (const [, member] of node.members) member.forget('gone');
  }

  /** Whether a message is to be read: one that came twice is not. */
  #isNext(node: Node, { seq, timeMs }: PayloadReader): boolean {
    if (seq < 0 || seq >= NUMBERS) return true;
    if (node.seq >= 0 && seq === node.seq && timeMs === node.timeMs) {
      this.counts.repeated++;
      return false;
    }
    const missed = node.seq < 0 ? 0 : (seq - node.seq - 1 + NUMBERS) % NUMBERS;
    if (missed > 0) this.counts.gaps++;
    this.counts.missed += missed;
    node.seq = seq;
    node.timeMs = timeMs;
    return true;
  }
}

function birthNumberOf(reader: PayloadReader): number {
  let found = -1;
  reader.visit((metric) => {
    if (metric.name !== BIRTH_NUMBER) return;
    const number = metricNumber(metric, UINT64);
    if (number >= 0) found = number;
  });
  return found;
}
