/** SHA-256 of a file as stored, where it is not read through byte by byte anyway. */
import { createHash } from 'node:crypto';
import { createReadStream } from 'node:fs';

/** The digest, hex. */
export async function digestOfFile(path: string): Promise<string> {
  const hash = createHash('sha256');
  for await (const part of createReadStream(path, { highWaterMark: 1 << 20 })) hash.update(part as Buffer);
  return hash.digest('hex');
}
