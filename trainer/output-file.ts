/** Files that commands write: whole or not at all, and a refusal in one line where that fails. */
import { replaceFile } from '@stillwell/runtime/files';
import { TrainError } from './errors.ts';

/**
 * Writes or replaces a file.
 *
 * throws  TrainError 'file' with the system's reason; the old file stands then
 */
export function writeOutput(path: string, content: Uint8Array | string): void {
  try {
    replaceFile(path, content);
  } catch (cause) {
    throw new TrainError('file', `cannot write ${path}: ${(cause as Error).message}`, { cause });
  }
}
