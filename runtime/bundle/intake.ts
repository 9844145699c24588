/**
 * Where offered bundles come in, from the broker or from the data folder: judged, put to work at the present tick boundary, and
 * what became of each said in one sentence.
 */
import { join } from 'node:path';
import { type BundleChange, toHex } from '@stillwell/protocol';
import type { Engine } from '../engine.ts';
import type { GatewayPorts } from '../ports.ts';
import type { BundleKeeper } from './change.ts';

/** A bundle file put here is taken in, checked, and removed. */
export function incomingPath(folder: string): string {
  return join(folder, 'incoming.swb');
}

/** What an intake is made of. */
export interface IntakeOptions {
  readonly keeper: BundleKeeper;
  readonly engine: Engine;
  readonly ports: Pick<GatewayPorts, 'clock' | 'disk' | 'log'>;
  /** The data folder. */
  readonly folder: string;
  /** A bundle was put to work, renewed or refused, and `lastChange` says so. */
  readonly onChange: () => void;
}

/** See the file head. */
export class BundleIntake {
  readonly #options: IntakeOptions;
  #lastChange: BundleChange | null = null;
  #refused = '';

  constructor(options: IntakeOptions) {
    this.#options = options;
  }

  /** The last bundle that was put to work or refused; null before the first. */
  get lastChange(): BundleChange | null {
    return this.#lastChange;
  }

  /** Checks a sealed bundle and, if it holds, puts it to work at this tick boundary; the outcome as one sentence. */
  offer(sealed: Uint8Array, from: string): string {
    const { keeper, engine, ports } = this.#options;
    const before = engine.serving?.checked ?? null;
    const offered = keeper.offer(sealed, before);
    if (offered.outcome === 'known') return 'this bundle is known already';
    const was = before === null ? null : toHex(before.digest);
    if (offered.outcome === 'refused') return this.#refuse(from, was, offered.code, offered.reason);
    const { checked, isSameDocument } = offered;
    if (isSameDocument) engine.restamp(checked);
    else if (!engine.install(checked)) return this.#refuse(from, was, 'model', 'it fails on what was read here');
    this.#guard('pointer', () => keeper.serves(checked));
    const to = toHex(checked.digest);
    const outcome = isSameDocument ? 'renewed' : 'changed';
    this.#lastChange = { atMs: ports.clock.wall(), from: was, to, outcome, reason: null };
    this.#options.onChange();
    const text = `bundle ${from} ${outcome}: ${to.slice(0, 16)}…, sequence ${checked.sequence}`;
    ports.log.info(text);
    return text;
  }

  /** Takes a bundle left in the data folder. */
  takeIncoming(): void {
    const { ports, folder } = this.#options;
    const path = incomingPath(folder);
    this.#guard('incoming bundle', () => {
      if (ports.disk.size(path) === 0) return;
      const sealed = ports.disk.read(path);
      if (sealed !== null) this.offer(sealed, 'from the data folder');
      ports.disk.remove(path);
    });
  }

  #refuse(from: string, was: string | null, code: string, why: string): string {
    const { clock, log } = this.#options.ports;
    const text = `bundle ${from} refused (${code}): ${why}`;
    // A retained bundle comes again on every connect; one word about it is enough.
    if (text === this.#refused) return text;
    this.#refused = text;
    log.warn(text);
    this.#lastChange = { atMs: clock.wall(), from: was, to: null, outcome: 'refused', reason: `${code}: ${why}` };
    this.#options.onChange();
    return text;
  }

  /** A disk that takes nothing must not keep a good bundle from serving. */
  #guard(what: string, work: () => void): void {
    try {
      work();
    } catch (error) {
      this.#options.ports.log.error(`${what}: ${(error as Error).message}`);
    }
  }
}
