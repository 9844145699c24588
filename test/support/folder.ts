/** A folder of its own for a test, gone afterwards. */
import { mkdtempSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { onTestFinished } from 'vitest';

/** Makes an empty folder that is removed when the running test ends. */
export function testFolder(): string {
  const folder = mkdtempSync(join(tmpdir(), 'stillwell-test-'));
  onTestFinished(() => rmSync(folder, { recursive: true, force: true }));
  return folder;
}
