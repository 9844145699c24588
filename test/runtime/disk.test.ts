import { readdirSync } from 'node:fs';
import { expect, test } from 'vitest';
import { nodeDisk } from '../../runtime/disk.ts';

test.skipIf(process.platform !== 'linux')('a file that cannot be cut to its length leaves no descriptor open', () => {
  const before = readdirSync('/proc/self/fd').length;
  for (let i = 0; i < 20; i++) expect(() => nodeDisk.openAppend('/dev/full', 100)).toThrow('EINVAL');
  expect(readdirSync('/proc/self/fd').length).toBeLessThan(before + 10);
});
