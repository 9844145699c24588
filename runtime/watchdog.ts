/**
 * Sees to it that a loop that hangs does not hang for ever. A thread beside it (watchdog-thread.ts) ends the process after
 * half a minute and leaves the call stack in the data folder; whatever started the gateway starts it again, and the next
 * start says what happened. Under systemd the loop also reports itself alive (service-notice.ts), for a process that cannot
 * even do that.
 */
import { join } from 'node:path';
import { Worker } from 'node:worker_threads';
import type { Disk } from './disk.ts';
import type { Log } from './log.ts';
import { type HangRecord, type WatchOrders, watchLoop } from './watchdog-thread.ts';

const BEAT_MS = 1000;
const LOOK_MS = 3500;
/** Seven looks, at most, and the examination end within 30 s of the last beat. */
const LOOKS = 6;
const ANSWER_MS = 3000;
/** It runs a page of code; V8 would set aside room for a whole program. */
const ROOM = { maxYoungGenerationSizeMb: 1, maxOldGenerationSizeMb: 8, codeRangeSizeMb: 2, stackSizeMb: 1 };

/** How often the loop is looked at; shorter in tests alone. */
export interface WatchTimes {
  readonly beatMs: number;
  readonly lookMs: number;
}

/** Says what an earlier run hung at, once, and keeps that record under another name. */
export function tellOfHang(disk: Disk, folder: string, log: Log): void {
  const file = hangFile(folder);
  const bytes = disk.read(file);
  if (bytes === null) return;
  log.error(`an earlier run hung and was ended: ${describe(bytes)}; the whole of it is in ${toldFile(folder)}`);
  try {
    disk.rename(file, toldFile(folder));
  } catch (error) {
    log.warn(`${file}: ${(error as Error).message}`);
  }
}

/** Watches this thread's loop until the function it gives is called. */
export function watchThisLoop(
  folder: string,
  log: Log,
  times: WatchTimes = { beatMs: BEAT_MS, lookMs: LOOK_MS },
): () => Promise<void> {
  const beats = new SharedArrayBuffer(4);
  const count = new Int32Array(beats);
  const when = { everyMs: times.lookMs, looks: LOOKS, answerMs: ANSWER_MS };
  const orders: WatchOrders = { beats, file: hangFile(folder), pid: process.pid, ...when };
  const worker = new Worker(`(${watchLoop})()`, { eval: true, workerData: orders, resourceLimits: ROOM, execArgv: [] });
  worker.unref();
  worker.once('error', (error) => log.error(`nothing watches for a hung loop any more: ${error.message}`));
  const beat = setInterval(() => Atomics.add(count, 0, 1), times.beatMs);
  beat.unref();
  return async () => {
    clearInterval(beat);
    await worker.terminate();
  };
}

function hangFile(folder: string): string {
  return join(folder, 'hang.json');
}

function toldFile(folder: string): string {
  return join(folder, 'hang-told.json');
}

function describe(bytes: Uint8Array): string {
  try {
    const { at, silent_s, stack, thread_state } = JSON.parse(Buffer.from(bytes).toString('utf8')) as HangRecord;
    const where = stack[0] === undefined ? `no JavaScript, thread state ${thread_state}` : `${stack[0].function}`;
    return `at ${at}, silent for ${silent_s} s, in ${where}`;
  } catch {
    return 'its record is not readable';
  }
}
