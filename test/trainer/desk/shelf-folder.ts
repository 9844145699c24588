/** A bundle folder for a desk under test. */
import { writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { testFolder } from '../../support/folder.ts';

/** A folder holding these documents as candidates. */
export function shelfFolder(documents: readonly Uint8Array[]): string {
  const folder = testFolder();
  documents.forEach((document, i) => {
    writeFileSync(join(folder, `${i}.swc`), document);
  });
  return folder;
}
