/**
 * Open warnings in the data folder, so that a restart neither opens one twice nor forgets to close one. Written when a
 * warning is said, which is seldom; a lost file costs a second opening, no more.
 */
import { join } from 'node:path';
import { isName } from '@stillwell/protocol';
import { type Disk, replaceOn } from '../disk.ts';
import { LIMITS } from './outlooks.ts';

/** One warning as it lies on disk; times are ticks. */
export interface KeptWarning {
  readonly signal: string;
  /** Its name in messages. */
  readonly limit: string;
  readonly value: number;
  readonly sinceTick: number;
  readonly seenTick: number;
  readonly crossedTick: number | null;
  readonly probability: number;
  /** A last word that is not out yet; null: the warning is open. */
  readonly ending: { readonly status: 'closed' | 'expired'; readonly reason: string | null } | null;
}

const FORMAT = 1;

function pathIn(folder: string): string {
  return join(folder, 'warnings.json');
}

/** throws  the disk's error, the old file untouched */
export function keepWarnings(disk: Disk, folder: string, warnings: readonly KeptWarning[]): void {
  if (warnings.length === 0 && disk.size(pathIn(folder)) === 0) return;
  replaceOn(disk, pathIn(folder), new TextEncoder().encode(JSON.stringify({ format: FORMAT, warnings })));
}

/** What was kept; none where there is no file. 'damaged': something else stands there. */
export function keptWarnings(disk: Disk, folder: string): readonly KeptWarning[] | 'damaged' {
  let bytes: Uint8Array | null;
  try {
    bytes = disk.read(pathIn(folder));
  } catch {
    return 'damaged';
  }
  if (bytes === null) return [];
  try {
    const { format, warnings } = JSON.parse(new TextDecoder().decode(bytes)) as Record<string, unknown>;
    if (format !== FORMAT || !Array.isArray(warnings) || !warnings.every(isKept)) return 'damaged';
    return warnings;
  } catch {
    return 'damaged';
  }
}

const isTick = (value: unknown): boolean => Number.isSafeInteger(value) && (value as number) >= 0;

function isKept(value: unknown): value is KeptWarning {
  const one = value as Partial<KeptWarning> | null;
  if (typeof one !== 'object' || one === null) return false;
  const { signal, limit, sinceTick, seenTick, crossedTick, probability, ending } = one;
  return (
    typeof signal === 'string' &&
    isName(signal) &&
    LIMITS.some(([name]) => name === limit) &&
    Number.isFinite(one.value) &&
    isTick(sinceTick) &&
    isTick(seenTick) &&
    (crossedTick === null || isTick(crossedTick)) &&
    typeof probability === 'number' &&
    probability >= 0 &&
    probability <= 1 &&
    (ending === null || isEnding(ending))
  );
}

function isEnding(value: unknown): boolean {
  const { status, reason } = (value ?? {}) as { status?: unknown; reason?: unknown };
  return (status === 'closed' || status === 'expired') && (reason === null || typeof reason === 'string');
}
