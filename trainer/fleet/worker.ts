/**
 * A fleet's worker thread: takes one site at a time, says how far it is, and gives back files to be written. It writes
 * nothing itself, so that it can be stopped at any moment.
 */
import { parentPort } from 'node:worker_threads';
import { ProtocolError } from '@stillwell/protocol';
import type { NewFile } from '@stillwell/runtime/files';
import { TrainError } from '../errors.ts';
import { type FitSiteJob, fitSite } from '../fit-site.ts';
import { digestInputs, readRecord, recordFile } from './fit-record.ts';
import { type SiteFacts, siteFacts } from './site-facts.ts';

/** What a worker is given. */
export interface FleetTask {
  /** Number of the site in the fleet, for messages. */
  readonly index: number;
  readonly job: FitSiteJob;
  /** Fit even where nothing changed. */
  readonly isFresh: boolean;
}

/** What it gives back: no files where an earlier result stands. */
export type FleetOutcome =
  | { readonly kind: 'fitted'; readonly facts: SiteFacts; readonly files: readonly NewFile[] }
  | { readonly kind: 'unchanged'; readonly facts: SiteFacts }
  | { readonly kind: 'failed'; readonly problem: string };

/** What it says meanwhile. */
export interface FleetNote {
  readonly index: number;
  readonly step: string;
}

/** Runs one task; a site's own trouble is an outcome, never a throw. */
export default async function run({ index, job, isFresh }: FleetTask): Promise<FleetOutcome> {
  const say = (step: string): void => parentPort?.postMessage({ index, step } satisfies FleetNote);
  try {
    say('looking for changes');
    const inputs = await inputsOf(job);
    const earlier = isFresh || inputs === null ? null : readRecord(job.out);
    if (earlier !== null && earlier.inputs === inputs) return { kind: 'unchanged', facts: earlier.facts };
    say('reading');
    const fitted = await fitSite(job, {
      reading: { update: () => {}, end: () => {} },
      step: say,
      end: () => {},
    });
    const facts = siteFacts(fitted);
    const files = inputs === null ? fitted.files : [...fitted.files, recordFile(job.out, inputs, fitted.files, facts)];
    // Copies: a view on a larger buffer would travel with all of it.
    return {
      kind: 'fitted',
      facts,
      files: files.map((file) => ({
        ...file,
        bytes: typeof file.bytes === 'string' ? file.bytes : Uint8Array.from(file.bytes),
      })),
    };
  } catch (error) {
    return { kind: 'failed', problem: problemOf(error) };
  }
}

/** Null where a file cannot be read: the reader's own refusal says so better. */
async function inputsOf(job: FitSiteJob): Promise<string | null> {
  try {
    return await digestInputs(job);
  } catch {
    return null;
  }
}

function problemOf(error: unknown): string {
  if (error instanceof TrainError || error instanceof ProtocolError) return error.message;
  if (error instanceof RangeError && /allocation|array length/i.test(error.message)) {
    return `the memory of this machine does not hold this fit (${error.message}); fit it alone, on a larger machine, or with a longer tick`;
  }
  const { message, stack } = error as Error;
  return `the fit broke off by a fault of this program: ${process.env.STILLWELL_DEBUG ? stack : message}`;
}
