/** Keys, sealing and showing, and what each refuses. */
import { readFileSync, statSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { decodeBundle, openSealed, publicHalf } from '@stillwell/protocol';
import { describe, expect, test } from 'vitest';
import { encodeBundle } from '../../../protocol/index.ts';
import { keysCommand } from '../../../trainer/commands/keys.ts';
import { sealCommand } from '../../../trainer/commands/seal.ts';
import { showCommand } from '../../../trainer/commands/show.ts';
import { readKey } from '../../../trainer/key-file.ts';
import { hearing } from '../../support/command.ts';
import { testFolder } from '../../support/folder.ts';
import { SegmentMaker, sealableBundle } from '../../support/segment-maker.ts';

const good = sealableBundle({ site: 'pump-7', seed: 1 });
const dull = encodeBundle({ ...good.bundle, judge: { ...good.bundle.judge, hasSkill: false } });

const run = hearing();

async function folderWithKey(): Promise<{ folder: string; at: (name: string) => string }> {
  const folder = testFolder();
  const at = (name: string): string => join(folder, name);
  await run(keysCommand(), 'new', '--out', at('author.key'));
  writeFileSync(at('good.swc'), good.document);
  writeFileSync(at('dull.swc'), dull);
  return { folder, at };
}

describe('keys', () => {
  test('a pair is made, the private half for its owner alone, and never replaced without being told', async () => {
    const { at } = await folderWithKey();
    expect(statSync(at('author.key')).mode & 0o777).toBe(0o600);
    expect(readFileSync(at('author.pub'), 'utf8')).not.toContain('private');
    await expect(run(keysCommand(), 'new', '--out', at('author.key'))).rejects.toThrow(/there already; add --force/);
    const shown = await run(keysCommand(), 'show', at('author.key'));
    expect(shown).not.toContain(
      Buffer.from((readKey(at('author.key')) as { privateKey: Uint8Array }).privateKey).toString('hex'),
    );
  });
});

describe('seal', () => {
  test('a good candidate opens with the public key; the next one stands above it', async () => {
    const { at } = await folderWithKey();
    const seal = ['--candidate', at('good.swc'), '--key', at('author.key')];
    await run(sealCommand(), ...seal, '--out', at('1.swb'));
    const said = JSON.parse(await run(sealCommand(), ...seal, '--after', at('1.swb'), '--out', at('2.swb'), '--json'));
    expect(said).toMatchObject({ site: 'pump-7', sequence: 2, epoch: 1 });
    const opened = openSealed(readFileSync(at('2.swb')), [publicHalf(readKey(at('author.pub')))]);
    expect(opened.sequence).toBe(2);
    const again = run(sealCommand(), ...seal, '--after', at('2.swb'), '--sequence', '2', '--out', at('3.swb'));
    await expect(again).rejects.toThrow(/expected more than 2/);
  });

  test('no skill, no seal, unless a person gives a reason, which then stands in the document', async () => {
    const { at } = await folderWithKey();
    const seal = ['--candidate', at('dull.swc'), '--key', at('author.key'), '--out', at('d.swb')];
    await expect(run(sealCommand(), ...seal)).rejects.toThrow(/no skill over the obvious forecasts/);
    expect(statSync(at('d.swb'), { throwIfNoEntry: false })).toBeUndefined();
    await run(sealCommand(), ...seal, '--override', 'trial at the bench');
    const { document } = openSealed(readFileSync(at('d.swb')), [publicHalf(readKey(at('author.pub')))]);
    expect(decodeBundle(document).judge).toMatchObject({ hasSkill: false, override: 'trial at the bench' });
  });

  test('a probe that does not hold, a public key, and a bundle too large are refused', async () => {
    const { at } = await folderWithKey();
    const { probe } = good.bundle;
    writeFileSync(at('p.swc'), encodeBundle({ ...good.bundle, probe: { ...probe, digest: new Uint8Array(32) } }));
    const out = ['--out', at('x.swb')];
    await expect(run(sealCommand(), '--candidate', at('p.swc'), '--key', at('author.key'), ...out)).rejects.toThrow(
      /probe's outputs differ/,
    );
    await expect(run(sealCommand(), '--candidate', at('good.swc'), '--key', at('author.pub'), ...out)).rejects.toThrow(
      /public half/,
    );
    const small = ['--max-bytes', '1000'];
    await expect(
      run(sealCommand(), '--candidate', at('good.swc'), '--key', at('author.key'), ...out, ...small),
    ).rejects.toThrow(/expected at most 1000/);
  });
});

describe('show', () => {
  test('says what was verified, and refuses another key, a cut and a turned bit', async () => {
    const { at } = await folderWithKey();
    await run(sealCommand(), '--candidate', at('good.swc'), '--key', at('author.key'), '--out', at('1.swb'));
    const text = await run(showCommand(), at('1.swb'), '--key', at('author.pub'));
    expect(text).toContain('signature holds');
    expect(text).toContain('every bit as stated');
    expect(text).toContain('level');
    const facts = JSON.parse(await run(showCommand(), at('1.swb'), '--json'));
    expect(facts).toMatchObject({
      what: 'bundle',
      site: 'pump-7',
      probe: 'holds',
      seal: { signature: 'not verified' },
    });
    await run(keysCommand(), 'new', '--out', at('other.key'));
    await expect(run(showCommand(), at('1.swb'), '--key', at('other.pub'))).rejects.toThrow(
      /expected a signature by a trusted author key/,
    );
    const bytes = readFileSync(at('1.swb'));
    writeFileSync(at('cut.swb'), bytes.subarray(0, bytes.length - 9));
    await expect(run(showCommand(), at('cut.swb'))).rejects.toThrow(/cut short/);
    bytes[bytes.length - 30]! ^= 1;
    writeFileSync(at('bit.swb'), bytes);
    await expect(run(showCommand(), at('bit.swb'))).rejects.toThrow(/altered or damaged/);
    await expect(run(showCommand(), at('none.swb'))).rejects.toThrow(/no such file/);
  });

  test('a candidate and a segment are shown for what they are', async () => {
    const { at } = await folderWithKey();
    expect(await run(showCommand(), at('dull.swc'))).toContain('NO skill');
    const maker = new SegmentMaker('pump-7', 'gw-1', good.document, good.model);
    maker.tick(100, Float64Array.of(10, 13));
    maker.close();
    writeFileSync(at('0.sws'), maker.made[0]!.bytes);
    expect(await run(showCommand(), at('0.sws'))).toContain('keyed: carries the filter');
    expect(JSON.parse(await run(showCommand(), at('0.sws'), '--json'))).toMatchObject({ what: 'segment', ticks: 1 });
  });
});
