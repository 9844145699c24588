/** Frames in, states out: of a scene whose few causes are known. */
import { readdirSync, readFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { describe, expect, test } from 'vitest';
import { condenseCommand } from '../../../trainer/commands/condense.ts';
import { readCondenser } from '../../../trainer/wide/condenser.ts';
import { openRandom } from '../../../trainer/wide/random.ts';
import { hearing } from '../../support/command.ts';
import { testFolder } from '../../support/folder.ts';
import { writeNpy } from '../../support/frames.ts';

const LENGTH = 400;
const TIMES = ['--start', '2026-03-01T00:00:00Z', '--tick', '1000'];
/** Small enough to be quick. */
const SMALL = [...TIMES, '--projection', '64', '--rank', '16'];
const run = hearing();

/** A slow oscillation and its quadrature, each with a picture of its own, in noise of the same size at every pixel. */
function scene(count: number, seed: number, noise: number): { frames: Float32Array; causes: Float64Array[] } {
  const random = openRandom(seed);
  const pictures = [openRandom(77), openRandom(78)].map((drawn) =>
    Float64Array.from({ length: LENGTH }, () => drawn.normal()),
  );
  const frames = new Float32Array(count * LENGTH);
  const causes = [new Float64Array(count), new Float64Array(count)];
  const [c, s] = [0.99 * Math.cos(0.1), 0.99 * Math.sin(0.1)];
  let [u, v] = [1, 0];
  for (let t = 0; t < count; t++) {
    [u, v] = [c * u - s * v + 0.1 * random.normal(), s * u + c * v + 0.1 * random.normal()];
    causes[0][t] = u;
    causes[1][t] = v;
    for (let j = 0; j < LENGTH; j++)
      frames[t * LENGTH + j] = 20 + u * pictures[0][j] + v * pictures[1][j] + noise * random.normal();
  }
  return { frames, causes };
}

function rowsOf(path: string): { times: string[]; values: number[][] } {
  const [, ...lines] = readFileSync(path, 'utf8').trimEnd().split('\n');
  const cells = lines.map((line) => line.split(','));
  return { times: cells.map(([time]) => time), values: cells.map((row) => row.slice(1).map(Number)) };
}

/** Share of a cause's variance that a linear combination of two states explains. */
function explained(cause: Float64Array, values: number[][]): number {
  const mean = cause.reduce((sum, value) => sum + value, 0) / cause.length;
  const y = cause.map((value) => value - mean);
  const sum = (f: (i: number) => number): number => y.reduce((total, _, i) => total + f(i), 0);
  const [a, b] = [0, 1].map((k) => sum((i) => values[i][k]) / y.length);
  const p = (i: number): number => values[i][0] - a;
  const q = (i: number): number => values[i][1] - b;
  const [pp, pq, qq] = [sum((i) => p(i) ** 2), sum((i) => p(i) * q(i)), sum((i) => q(i) ** 2)];
  const [py, qy] = [sum((i) => p(i) * y[i]), sum((i) => q(i) * y[i])];
  const det = pp * qq - pq * pq;
  const [f, g] = [(qq * py - pq * qy) / det, (pp * qy - pq * py) / det];
  return (f * py + g * qy) / sum((i) => y[i] ** 2);
}

describe('a scene of two causes in noise', () => {
  const noise = 1.5;
  const { frames, causes } = scene(1500, 1, noise);

  test('comes down to two states that carry both causes', async () => {
    const folder = testFolder();
    const file = writeNpy(join(folder, 'kiln.npy'), frames, LENGTH);
    const out = join(folder, 'out');
    const said = JSON.parse(await run(condenseCommand(), '--frames', file, ...SMALL, '--out', out, '--json'));
    expect(said).toMatchObject({ order: 2, has_skill: true, tick_ms: 1000, rows: 1500 - 15 });
    const { times, values } = rowsOf(join(out, 'states.csv'));
    expect(times[0]).toBe('2026-03-01T00:00:15.000Z');
    expect(times.at(-1)).toBe('2026-03-01T00:24:59.000Z');
    for (const cause of causes) expect(explained(cause.slice(15), values)).toBeGreaterThan(0.85);
    // The mean frame errs by the causes, the newest frame held by noise twice: some of both is saved.
    expect(said.skill).toBeGreaterThan(0.1);
    expect(readdirSync(out).sort()).toEqual(['condenser.swn', 'report.html', 'states.csv']);
    const page = readFileSync(join(out, 'report.html'), 'utf8');
    for (const words of [
      'kiln.npy: what its frames come down to',
      'Advisory estimate',
      '2 states forecast held-out frames',
    ])
      expect(page).toContain(words);
    expect(page).not.toMatch(/NaN|undefined/);
  });

  test('gives the same bytes again, and condenses another recording alike with its condenser', async () => {
    const folder = testFolder();
    const path = writeNpy(join(folder, 'kiln.npy'), frames, LENGTH);
    const at = (name: string): string => join(folder, name);
    await run(condenseCommand(), '--frames', path, ...SMALL, '--out', at('a'));
    await run(condenseCommand(), '--frames', path, ...SMALL, '--out', at('b'));
    for (const name of ['condenser.swn', 'states.csv', 'report.html'])
      expect(readFileSync(join(at('b'), name)).equals(readFileSync(join(at('a'), name))), name).toBe(true);
    await run(
      condenseCommand(),
      '--frames',
      path,
      ...TIMES,
      '--with',
      join(at('a'), 'condenser.swn'),
      '--out',
      at('c'),
    );
    expect(readFileSync(join(at('c'), 'states.csv'), 'utf8')).toBe(readFileSync(join(at('a'), 'states.csv'), 'utf8'));
    expect(readdirSync(at('c')).sort()).toEqual(['report.html', 'states.csv']);
    // The same recording is held out no more than it was: what was learned from is not judged again.
    const judged = (folder: string): string | undefined =>
      /\d+ forecasts from [^.]*/.exec(readFileSync(join(at(folder), 'report.html'), 'utf8'))?.[0];
    expect(judged('c')).toBe(judged('a'));
    // A day later, other noise: the same causes show in the same states.
    const later = scene(600, 2, noise);
    const other = writeNpy(at('later.npy'), later.frames, LENGTH);
    const start = ['--start', '2026-03-02T00:00:00Z', '--tick', '1000'];
    const told = JSON.parse(
      await run(
        condenseCommand(),
        '--frames',
        other,
        ...start,
        '--with',
        join(at('a'), 'condenser.swn'),
        '--out',
        at('d'),
        '--json',
      ),
    );
    expect(told.has_skill).toBe(true);
    expect(explained(later.causes[0].slice(15), rowsOf(join(at('d'), 'states.csv')).values)).toBeGreaterThan(0.9);
  });

  test('two files that follow on are one recording, and a row may cover several frames', async () => {
    const folder = testFolder();
    const half = 700 * LENGTH;
    const one = writeNpy(join(folder, 'one.npy'), frames.slice(0, half), LENGTH);
    const two = writeNpy(join(folder, 'two.npy'), frames.slice(half), LENGTH);
    const whole = writeNpy(join(folder, 'whole.npy'), frames, LENGTH);
    const options = [
      ...TIMES,
      '--every',
      '10000',
      '--features',
      '128',
      '--rank',
      '16',
      '--window',
      '4',
      '--horizon',
      '4',
    ];
    const told = JSON.parse(
      await run(condenseCommand(), '--frames', one, two, ...options, '--out', join(folder, 'parts'), '--json'),
    );
    await run(condenseCommand(), '--frames', whole, ...options, '--out', join(folder, 'whole'));
    expect(told).toMatchObject({ rows: 150, tick_ms: 10_000, has_skill: true });
    const of = (name: string): string => readFileSync(join(folder, name, 'states.csv'), 'utf8');
    expect(of('parts')).toBe(of('whole'));
    expect(rowsOf(join(folder, 'parts', 'states.csv')).times[1]).toBe('2026-03-01T00:00:10.000Z');
  });
});

describe('says so where there is nothing to forecast', () => {
  test('noise alone has no skill, and is not called a state to build on', async () => {
    const folder = testFolder();
    const random = openRandom(5);
    const file = writeNpy(
      join(folder, 'dark.npy'),
      Float32Array.from({ length: 500 * 64 }, () => random.normal()),
      64,
    );
    const told = JSON.parse(
      await run(condenseCommand(), '--frames', file, ...TIMES, '--out', join(folder, 'out'), '--json'),
    );
    expect(told).toMatchObject({ has_skill: false });
    expect(told.verdict).toContain('Do not build on them');
  });
});

describe('refusals', () => {
  const frames = Float32Array.from({ length: 400 * 8 }, (_, k) => Math.sin(k));

  async function refusal(frames: Float32Array, length: number, ...options: string[]): Promise<string> {
    const folder = testFolder();
    const file = writeNpy(join(folder, 'f.npy'), frames, length);
    const failed = await run(condenseCommand(), '--frames', file, '--out', join(folder, 'out'), ...options).then(
      () => 'accepted',
      (error: Error) => error.message.replaceAll(folder, ''),
    );
    expect(readdirSync(folder)).toEqual(['f.npy']);
    return failed;
  }

  test.each([
    ['no start', frames, 8, ['--tick', '1000'], 'does not say when its first frame was taken; add --start'],
    ['no tick', frames, 8, ['--start', '2026-03-01T00:00:00Z'], 'how far apart its frames are; add --tick'],
    ['too short', frames.slice(0, 8 * 100), 8, TIMES, 'expected at least 410 without a break'],
    ['a still picture', new Float32Array(800 * 8).fill(7), 8, TIMES, 'expected frames that change'],
    ['rows closer than frames', frames, 8, [...TIMES, '--every', '500'], '--every: expected at least the 1000 ms'],
    [
      'more memory than there is',
      frames,
      8,
      [...TIMES, '--features', '1000000', '--rank', '512'],
      'MiB of memory, and',
    ],
    [
      'more states than singular values',
      frames,
      8,
      [...TIMES, '--order', '9', '--rank', '8'],
      'at most the 8 of --rank',
    ],
    ['a start without a zone', frames, 8, ['--start', '2026-03-01', '--tick', '1'], 'Expected a time with a zone'],
    ['a tick of nothing', frames, 8, ['--tick', '0'], 'above 0'],
    ['an odd number of features', frames, 8, [...TIMES, '--features', '7'], 'Expected an even number'],
  ])('%s', async (_, values, length, options, message) => {
    expect(await refusal(values, length, ...options)).toMatch(message);
  });

  test('a condenser of other frames, a damaged one, and options it has decided', async () => {
    const folder = testFolder();
    const { frames: good } = scene(500, 3, 1);
    const at = (name: string): string => join(folder, name);
    const file = writeNpy(at('good.npy'), good, LENGTH);
    await run(condenseCommand(), '--frames', file, ...TIMES, '--out', at('out'));
    const own = join(at('out'), 'condenser.swn');
    const other = writeNpy(at('other.npy'), frames, 8);
    const use = (path: string, using: string, ...more: string[]): Promise<string> =>
      run(condenseCommand(), '--frames', path, ...TIMES, '--with', using, '--out', at('again'), ...more);
    await expect(use(other, own)).rejects.toThrow('expected frames of 400 numbers');
    await expect(use(file, own, '--window', '8')).rejects.toThrow(
      '--window: the condenser given with --with decides that',
    );
    const bytes = readFileSync(own);
    bytes[400] ^= 1;
    writeFileSync(at('bad.swn'), bytes);
    await expect(use(file, at('bad.swn'))).rejects.toThrow('the file is damaged');
    writeFileSync(at('new.swn'), readFileSync(own).fill(9, 8, 9));
    await expect(use(file, at('new.swn'))).rejects.toThrow('expected a condenser of version 1, got version 9');
    await expect(use(file, file)).rejects.toThrow('expected a condenser file, got another kind of file');
    await expect(use(file, at('none.swn'))).rejects.toThrow('none.swn: expected a condenser file, got nothing');
    await expect(use(file, '')).rejects.toThrow('--with: expected a path');
    await expect(use('', own)).rejects.toThrow('--frames: expected a path');
    expect(readCondenser(own).shape.frameLength).toBe(LENGTH);
    await expect(run(condenseCommand(), '--frames', file, other, ...TIMES, '--out', at('mixed'))).rejects.toThrow(
      'expected frames of 400 numbers',
    );
  });
});
