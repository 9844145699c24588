/**
 * What a reader of one file format must do; read.ts drives it, and adds size and digest to its account.
 */
import type { SavedNode } from '@stillwell/protocol';
import type { FileRead } from './history.ts';
import { refusal, shown } from './refusal.ts';
import type { TimeReader } from './times.ts';

/** What a reader can tell of a file once it is through. */
export type FileAccount = Omit<FileRead, 'file' | 'bytes' | 'sha256' | 'timeKind'>;

/** Where a reader stands between two blocks, as plain data: a later run goes on from there. */
export interface ReaderState {
  /** Bytes of the last blocks that it has not yet made use of. */
  readonly rest: number;
  /** Line it stands at, as the reader counts. */
  readonly line: number;
  readonly rows: number;
  /** Names in the header; none where the format has no header. */
  readonly names: readonly string[];
  readonly missingMarks: Readonly<Record<string, number>>;
  readonly ignored?: readonly string[];
  readonly passedOver?: Readonly<Record<string, number>>;
  /** Time of the last message. */
  readonly arrivedMs?: number | null;
  /** Births of Sparkplug nodes, of captures. */
  readonly births?: readonly SavedNode[];
}

/** The reader of one file: blocks in, an account out. */
export interface FileReader {
  /** Takes the next block of whole lines. */
  push(block: Buffer): void;
  /** Ends the file; throws TrainError 'history' where it held no readings at all. */
  end(): FileAccount;
  /** Rows so far, for progress. */
  readonly rows: number;
  /** Where it stands. */
  state(): ReaderState;
  /** Goes on where an earlier run stood, before any block is taken. */
  restore(state: ReaderState): void;
}

/** Adds one to a count. */
export function tally(counts: Record<string, number>, key: string): void {
  counts[key] = (counts[key] ?? 0) + 1;
}

/** Refusal of a time, in the words of the reader's problem. */
export function timeRefusal(path: string, line: number, field: string, times: TimeReader, got: string): Error {
  return refusal({ file: path, line, field }, times.problem.expected, got, times.problem.remedy);
}

/** Refusal of a value that is no number. */
export function numberRefusal(path: string, line: number, field: string, text: string): Error {
  const place = { file: path, line, field };
  if (/^[+-]?[\d.]*\d,\d+$/.test(text.trim()))
    return refusal(place, 'a number', `${shown(text)} with a decimal comma`, 'export with decimal points');
  return refusal(
    place,
    'a number, or an empty field where there is no reading',
    shown(text),
    'mend the field, or empty it; NA, NaN, null and - also stand for no reading',
  );
}
