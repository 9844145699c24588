/** Own time out of a sampling profile: by folder, file and function, the largest first, all of it accounted for. */
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { expect, test } from 'vitest';
import { profileSummary } from './training-profile.ts';

const node = (id: number, functionName: string, url: string, lineNumber: number) => ({
  id,
  callFrame: { functionName, url, lineNumber },
});

test('a profile is summed by folder, by file and by function', () => {
  const folder = mkdtempSync(join(tmpdir(), 'stillwell-profile-'));
  try {
    const nodes = [
      node(1, '(root)', '', -1),
      node(2, 'multiply', 'file:///home/trainer/dist/linalg/products.js', 9),
      node(3, 'solve', 'file:///home/trainer/dist/linalg/products.js', 40),
      node(4, '(garbage collector)', '', -1),
    ];
    const profile = { nodes, samples: [2, 3, 2, 4, 1], timeDeltas: [5000, 2000, 1000, 1500, 500] };
    writeFileSync(join(folder, 'one.cpuprofile'), JSON.stringify(profile));
    writeFileSync(join(folder, 'other.txt'), 'no profile');
    const [head, ...lines] = profileSummary(folder);
    expect(head).toMatch(/one\.cpuprofile: 10 ms$/);
    const place = /^ +(\d+) ms +([\d.]+) % {2}(.+)$/;
    const read = lines.map((line) => place.exec(line)!.slice(1));
    expect(read).toEqual([
      ['8', '80.0', 'linalg'],
      ['2', '15.0', '(garbage collector)'],
      ['1', '5.0', '(root)'],
      ['8', '80.0', 'linalg/products.js'],
      ['2', '15.0', '(garbage collector)'],
      ['1', '5.0', '(root)'],
      ['6', '60.0', 'multiply linalg/products.js:10'],
      ['2', '20.0', 'solve linalg/products.js:41'],
      ['2', '15.0', '(garbage collector)'],
      ['1', '5.0', '(root)'],
    ]);
  } finally {
    rmSync(folder, { recursive: true, force: true });
  }
});
