/** What the system says of a file, in our words. Who runs the tests may be allowed to read everything, so its errors are made up. */
import { expect, test } from 'vitest';
import { unreadable } from '../../../trainer/history/refusal.ts';

test.each([
  ['ENOENT', 'a.csv: expected a log, got nothing: there is no such file; check the path'],
  ['EISDIR', 'a.csv: expected a log, got a folder; name the files in it'],
  ['EACCES', "a.csv: may not be read; check the file's permissions"],
  ['EPERM', "a.csv: may not be read; check the file's permissions"],
  ['EIO', 'a.csv: cannot be read (EIO); check the path and the disk'],
])('%s', (code, message) => {
  const cause = Object.assign(new Error(`${code}: as the system has it`), { code });
  const refused = unreadable('a.csv', 'a log', cause);
  expect(refused.message).toBe(message);
  expect(refused).toMatchObject({ code: 'file', cause });
});
