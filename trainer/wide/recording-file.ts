/** What must hold of a recording's file before its format is looked at: it is there, a file, may be read, and is not empty. */
import { closeSync, fstatSync, openSync, readSync } from 'node:fs';
import { TrainError } from '../errors.ts';
import { unreadable } from '../history/refusal.ts';

/** What a recording is, in messages. */
export const RECORDING = 'a recording of frames';

/** Length of the first and last bytes looked at. */
const EDGE_BYTES = 4;

/** What tells formats apart, and whole files from those cut short. */
export interface RecordingFile {
  readonly bytes: number;
  /** Its first and last four bytes, as Latin-1; fewer where the file has fewer. */
  readonly begins: string;
  readonly ends: string;
}

/** Looks; TrainError 'file' naming the file and what to do. */
export function inspectRecording(path: string): RecordingFile {
  let found: RecordingFile;
  try {
    const descriptor = openSync(path, 'r');
    try {
      found = edgesOf(descriptor);
    } finally {
      closeSync(descriptor);
    }
  } catch (cause) {
    throw unreadable(path, RECORDING, cause);
  }
  if (found.bytes === 0)
    throw new TrainError('file', `${path}: expected ${RECORDING}, got an empty file; fetch it again`);
  return found;
}

function edgesOf(descriptor: number): RecordingFile {
  const { size } = fstatSync(descriptor);
  const edge = (at: number): string => {
    const buffer = Buffer.alloc(EDGE_BYTES);
    // Of a folder this says what it is.
    const read = readSync(descriptor, buffer, 0, EDGE_BYTES, at);
    return buffer.toString('latin1', 0, read);
  };
  return { bytes: size, begins: edge(0), ends: edge(Math.max(0, size - EDGE_BYTES)) };
}
