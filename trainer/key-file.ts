/**
 * Key files on disk: the private one readable by its owner alone, the public one beside it to be given away.
 */
import { existsSync, readFileSync } from 'node:fs';
import { isKeyPair, type KeyPair, type PublicKey, parseKey } from '@stillwell/protocol';
import { TrainError } from './errors.ts';

/**
 * Reads a key file of either half.
 *
 * throws  TrainError 'file' when it cannot be read, ProtocolError 'key' when it is no key file
 */
export function readKey(path: string): PublicKey | KeyPair {
  return parseKey(readTextFile(path, 'a key file', 'make one with `stillwell keys new`'), path);
}

/**
 * Reads a key file that must hold the private half of an author key.
 *
 * throws  as readKey, and TrainError 'keys' when only the public half is there, or the key is of another kind
 */
export function readPrivateKey(path: string): KeyPair {
  const key = readKey(path);
  if (isKeyPair(key)) {
    if (key.kind === 'author') return key;
    throw new TrainError(
      'keys',
      `${path}: expected an author key to seal with, got a ${key.kind} key; give another --key`,
    );
  }
  throw new TrainError(
    'keys',
    `${path}: expected a private key to sign with, got the public half; give the file that \`stillwell keys new --out\` wrote`,
  );
}

/**
 * A file's bytes.
 *
 * throws  TrainError 'file' naming what was expected there, with what to do about it
 */
export function readBytesFile(path: string, expected: string, remedy = 'check the path'): Uint8Array {
  try {
    return Uint8Array.from(readFileSync(path));
  } catch (cause) {
    const code = (cause as NodeJS.ErrnoException).code;
    const got = code === 'ENOENT' ? 'no such file' : code === 'EISDIR' ? 'a folder' : (cause as Error).message;
    throw new TrainError('file', `${path}: expected ${expected}, got ${got}; ${remedy}`, { cause });
  }
}

/** As readBytesFile, as UTF-8 text; other bytes are refused. */
export function readTextFile(path: string, expected: string, remedy: string): string {
  const bytes = readBytesFile(path, expected, remedy);
  try {
    return new TextDecoder('utf-8', { fatal: true }).decode(bytes);
  } catch (cause) {
    throw new TrainError(
      'file',
      `${path}: expected ${expected} as text in UTF-8, got other bytes; check that it is the right file, or save it as UTF-8`,
      { cause },
    );
  }
}

/**
 * Refuses to write over a file unless told to.
 *
 * throws  TrainError 'file'
 */
export function refuseToReplace(path: string, force: boolean): void {
  if (!force && existsSync(path)) {
    throw new TrainError('file', `${path} is there already; add --force to replace it, or give another --out`);
  }
}
