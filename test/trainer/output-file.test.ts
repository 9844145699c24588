/** Room for results, looked for before the work that makes them. */
import { existsSync, mkdtempSync, readdirSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, describe, expect, it } from 'vitest';
import { withRoom } from '../../trainer/output-file.ts';

const base = mkdtempSync(join(tmpdir(), 'stillwell-room-'));
afterAll(() => rmSync(base, { recursive: true, force: true }));

describe('withRoom', () => {
  it('refuses a place that takes no files before the work begins', async () => {
    const file = join(base, 'file');
    writeFileSync(file, '');
    let begun = false;
    const work = async (): Promise<void> => {
      begun = true;
    };
    await expect(withRoom(file, work)).rejects.toThrow(/cannot write .*file: a file stands where a folder is wanted/);
    await expect(withRoom('', work)).rejects.toThrow(/--out: expected a path/);
    expect(begun).toBe(false);
  });

  it('leaves no folder behind where nothing came of the work, but what stood or was written there', async () => {
    const fail = async (): Promise<never> => {
      throw new Error('no');
    };
    const fresh = join(base, 'a', 'fresh');
    await expect(withRoom(fresh, fail)).rejects.toThrow('no');
    expect(existsSync(fresh)).toBe(false);
    const kept = join(base, 'kept');
    await withRoom(kept, async () => writeFileSync(join(kept, 'result'), 'x'));
    expect(readdirSync(kept)).toEqual(['result']);
    await expect(withRoom(kept, fail)).rejects.toThrow('no');
    expect(readdirSync(kept)).toEqual(['result']);
  });
});
