/**
 * What stands beside the result of each site of a fleet: of which inputs and options it came, and which bytes it was. The
 * same command run again goes on from there: a site whose inputs, options and result are unchanged is not fitted again.
 */
import { createHash } from 'node:crypto';
import { createReadStream, existsSync, readFileSync } from 'node:fs';
import { basename, join } from 'node:path';
import { sha256, toHex } from '@stillwell/protocol';
import type { NewFile } from '@stillwell/runtime/files';
import { TRAINER_VERSION } from '../compose.ts';
import type { FitSiteJob } from '../fit-site.ts';
import type { SiteFacts } from './site-facts.ts';

/** Name of the file. */
export const RECORD_FILE = 'fit-record.json';
/** Changes whenever a record of before says too little. */
const FORMAT = 1;

/** The record as stored. */
export interface FitRecord {
  readonly format: number;
  /** SHA-256 over site, options, and the path and bytes of every history file. */
  readonly inputs: string;
  /** SHA-256 of each file of the result, by name. */
  readonly outputs: Readonly<Record<string, string>>;
  readonly facts: SiteFacts;
}

/**
 * Digest of all that a site's result depends on. Files are read through; their paths count, since the survey names them.
 *
 * throws  the system's error where a file cannot be read
 */
export async function digestInputs(job: FitSiteJob): Promise<string> {
  const files: [string, string][] = [];
  for (const path of job.history) files.push([path, await digestFile(path)]);
  // Where the result goes says nothing of what it is.
  const all = { ...job, out: null, format: FORMAT, trainer: TRAINER_VERSION, files };
  return createHash('sha256').update(JSON.stringify(all)).digest('hex');
}

async function digestFile(path: string): Promise<string> {
  const hash = createHash('sha256');
  for await (const chunk of createReadStream(path, { highWaterMark: 1 << 20 })) hash.update(chunk as Buffer);
  return hash.digest('hex');
}

/** The record of a folder, where its result still is what it says; null otherwise. */
export function readRecord(folder: string): FitRecord | null {
  const path = join(folder, RECORD_FILE);
  if (!existsSync(path)) return null;
  try {
    const record = JSON.parse(readFileSync(path, 'utf8')) as FitRecord;
    if (record.format !== FORMAT || typeof record.inputs !== 'string') return null;
    const isWhole = Object.entries(record.outputs).every(
      ([name, digest]) => digestBytes(readFileSync(join(folder, basename(name)))) === digest,
    );
    return isWhole && typeof record.facts.site === 'string' ? record : null;
  } catch {
    // Damaged, or a file gone: then the site is fitted again, which mends it.
    return null;
  }
}

/** The record as a file beside the result. */
export function recordFile(folder: string, inputs: string, files: readonly NewFile[], facts: SiteFacts): NewFile {
  const outputs = Object.fromEntries(
    files.map(({ path, bytes }) => [
      basename(path),
      digestBytes(typeof bytes === 'string' ? Buffer.from(bytes) : bytes),
    ]),
  );
  const record: FitRecord = { format: FORMAT, inputs, outputs, facts };
  return { path: join(folder, RECORD_FILE), bytes: `${JSON.stringify(record, null, 2)}\n` };
}

function digestBytes(bytes: Uint8Array): string {
  return toHex(sha256(bytes));
}
