/** `stillwell size` through the command: what it says, and what it refuses in one line. */
import { afterAll, describe, expect, it } from 'vitest';
import { csv, Folders, ROWS, SITE_FILE } from '../support/bad-input.ts';

const folders = new Folders();
afterAll(() => folders.remove());

const FILES = { 'site.yaml': SITE_FILE, 'x.csv': csv(ROWS) };
const SIZE = 'stillwell size --site site.yaml --history x.csv';

/** A NumPy array file of float32 frames, all zero; layout as numpy.lib.format 1.0 has it. */
function npy(frames: number, length: number): Uint8Array {
  const head = `{'descr': '<f4', 'fortran_order': False, 'shape': (${frames}, ${length}), }`.padEnd(117) + '\n';
  const bytes = Buffer.concat([Buffer.from('\x93NUMPY\x01\x00', 'latin1'), Buffer.alloc(2), Buffer.from(head)]);
  bytes.writeUInt16LE(head.length, 8);
  return Buffer.concat([bytes, Buffer.alloc(4 * frames * length)]);
}

describe('what it says', () => {
  it('of a history, in words: way, memory, time, bundle, factors and what is never formed', async () => {
    const { code, out, err } = await folders.run(SIZE, folders.make(FILES));
    expect({ code, err }).toEqual({ code: 0, err: '' });
    for (const words of [
      /^mill-lane: 960 ticks of 3 channels, fitted in memory: about .* s and .* MB\./,
      /960 rows/,
      /in memory, all of it/,
      /peak memory +\d+ MB \([\d.]+ [GM]B are free\)/,
      /bundle +about/,
      /factors +/,
      /960 x 960: 921,600 entries, 7\.37 MB/,
      /SIMD/,
    ])
      expect(out).toMatch(words);
    expect(out).not.toMatch(/NaN|undefined|Infinity/);
  });

  it('as JSON, with frames of a file beside it', async () => {
    const folder = folders.make({ ...FILES, 'kiln.npy': npy(40, 12) });
    const { code, out } = await folders.run(`${SIZE} --frames kiln.npy --window 5 --json`, folder);
    expect(code).toBe(0);
    expect(JSON.parse(out)).toMatchObject({
      site: 'mill-lane',
      history: { rows: 960, ticks: 960, readings: 2880, isExact: true },
      fit: { way: 'in memory', shape: { signals: 3, horizon: 24 } },
      frames: { frames: 40, windows: 36, features: 60, gram: { entries: 1296 }, covariance: { entries: 3600 } },
      condense: { numbers: 12, rank: 32 },
      has_simd: expect.any(Boolean),
    });
  });

  it('of frames alone, by their numbers', async () => {
    const { out } = await folders.run('stillwell size --frames 90000/76800/50', folders.make({}));
    expect(out).toMatch(/^89,951 windows of 3,840,000 numbers: .* 64\.7 GB/);
  });
});

describe('refused in one line', () => {
  it.each([
    ['stillwell size', /expected --site and --history, or --frames, got none of them; add --help/],
    ['stillwell size --site site.yaml', /got --site alone/],
    ['stillwell size --history x.csv', /got --history alone/],
    ['stillwell size --site site.yaml --frames 9/9/9', /expected --site and --history together, got one of them/],
    [`${SIZE} --window 3`, /--window: expected --frames beside it/],
    ['stillwell size --site site.yaml --history gone.csv', /gone\.csv: expected a history file, got nothing/],
    [
      'stillwell size --site site.yaml --history none*.csv',
      /none\*\.csv: expected history files that match this pattern, got none/,
    ],
    [`${SIZE} --from 2030-01-01`, /expected readings of the site in the time asked for, saw none/],
    [`${SIZE} --from yesterday`, /--from: expected a time such as/],
    [
      'stillwell size --frames gone.npy',
      /--frames: expected count\/length\/window .*, got "gone\.npy"; check the path/,
    ],
    ['stillwell size --frames x.csv', /x\.csv: expected a recording in \.npy or \.parquet/],
    ['stillwell size --frames 10/4/11', /--frames: expected a window of 1 to 10 frames .*, got a window of 11/],
    ['stillwell size --frames 10/4/3 --window 2', /--window: expected no window in --frames beside it/],
    ['stillwell size --frames 10/0/3', /at least one number, got a window of 3 and 0 numbers a frame/],
  ])('%s', (line, words) => folders.refuse({ line, files: FILES, says: [words] }));
});
