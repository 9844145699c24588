/**
 * Browsers that follow along, each an open response of server-sent events (HTML Standard, 9.2). None is waited for: whoever
 * has not taken the last update yet is passed over, gets everything anew once it has, and is let go where that takes too
 * long. So what waits in memory is one update at most for each, and updates are one buffer shared by all.
 */
import type { ServerResponse } from 'node:http';

/** One update for everybody. */
export interface Update {
  /** What changed. */
  readonly news: Uint8Array;
  /** Everything; made when the first viewer needs it. */
  readonly all: () => Uint8Array;
}

interface Viewer {
  readonly response: ServerResponse;
  needsAll: boolean;
  /** When the update was written that it has not taken yet; null: it has taken all. */
  behindSinceMs: number | null;
}

/** Viewers at once. */
export const MOST_VIEWERS = 8;
const MOST_BEHIND_MS = 20_000;
const HEAD = {
  'Content-Type': 'text/event-stream; charset=utf-8',
  'Cache-Control': 'no-store',
  // For a proxy in between, which would otherwise gather events.
  'X-Accel-Buffering': 'no',
} as const;

/** See the file head. */
export class Viewers {
  readonly #viewers: Viewer[] = [];

  get count(): number {
    return this.#viewers.length;
  }

  /** Takes a viewer in; where the seats are taken, whoever sits there longest is told so and leaves. */
  add(response: ServerResponse, all: Uint8Array, nowMs: number): void {
    if (this.#viewers.length >= MOST_VIEWERS) {
      const longest = this.#viewers.shift()!;
      longest.response.end(event('displaced', '{}'));
    }
    const viewer: Viewer = { response, needsAll: false, behindSinceMs: null };
    this.#viewers.push(viewer);
    response.on('close', () => this.#drop(viewer));
    response.on('error', () => this.#drop(viewer));
    response.writeHead(200, HEAD);
    this.#write(viewer, all, nowMs);
  }

  /** Hands an update to everybody who has taken the last one. */
  send({ news, all }: Update, nowMs: number): void {
    for (const viewer of [...this.#viewers]) {
      if (this.#hasTaken(viewer, nowMs)) {
        const bytes = viewer.needsAll ? all() : news;
        viewer.needsAll = false;
        this.#write(viewer, bytes, nowMs);
      } else viewer.needsAll = true;
    }
  }

  /** A word that nobody must get: whoever is behind does without. */
  say(bytes: Uint8Array, nowMs: number): void {
    for (const viewer of [...this.#viewers])
      if (this.#hasTaken(viewer, nowMs) && !viewer.needsAll) this.#write(viewer, bytes, nowMs);
  }

  /** Says a last word and lets everybody go. */
  close(bytes: Uint8Array): void {
    for (const { response } of this.#viewers.splice(0)) response.end(bytes);
  }

  #write(viewer: Viewer, bytes: Uint8Array, nowMs: number): void {
    if (!viewer.response.write(bytes) || viewer.response.writableLength > 0) viewer.behindSinceMs = nowMs;
  }

  /** Whether nothing waits for a viewer; it is let go when something has waited too long. */
  #hasTaken(viewer: Viewer, nowMs: number): boolean {
    if (viewer.response.writableLength === 0) viewer.behindSinceMs = null;
    if (viewer.behindSinceMs === null) return true;
    if (nowMs - viewer.behindSinceMs > MOST_BEHIND_MS) {
      viewer.response.destroy();
      this.#drop(viewer);
    }
    return false;
  }

  #drop(viewer: Viewer): void {
    const at = this.#viewers.indexOf(viewer);
    if (at >= 0) this.#viewers.splice(at, 1);
  }
}

/** One event of one line of data. */
export function event(name: string, data: string): Uint8Array {
  return Buffer.from(`event: ${name}\ndata: ${data}\n\n`);
}
