/** The site file on disk. */
import { parseSite, type Site } from '@stillwell/protocol';
import { readTextFile } from './key-file.ts';

/**
 * Reads and checks a site file.
 *
 * throws  TrainError 'file' where it cannot be read, ProtocolError 'site-file' with line and field where it is not right
 */
export function readSite(path: string): Site {
  return parseSite(readTextFile(path, 'a site file', 'make a first one with `stillwell site --history …`'), path);
}
