/** Bundles, keys and places to write to that are no good, through both commands. */
import { existsSync } from 'node:fs';
import { join } from 'node:path';
import { createKeyPair, decodeBundle, encodeBundle, formatKey, publicHalf } from '@stillwell/protocol';
import { afterAll, describe, expect, it } from 'vitest';
import { Folders, PICTURE } from '../support/bad-input.ts';
import { type Case, contentsOf } from '../support/cli.ts';
import { author, documentOf, SITE_TEXT, sealedOf } from '../support/running-site.ts';

const folders = new Folders();
afterAll(() => folders.remove());

const other = createKeyPair(new Uint8Array(32).fill(8));
const rollout = createKeyPair(new Uint8Array(32).fill(9), 'rollout');
const good = sealedOf(1);
const turned = (at: number): Uint8Array => good.map((byte, n) => (n === at ? byte ^ 4 : byte));
const always = {
  'site.yaml': SITE_TEXT,
  'author.pub': formatKey(publicHalf(author)),
  'author.key': formatKey(author),
  'other.pub': formatKey(publicHalf(other)),
  'rollout.key': formatKey(rollout),
  'first.swc': documentOf(),
  'first.swb': good,
};

const gateway = (command: string): string =>
  `stillwell-gateway ${command} --site site.yaml --trust author.pub --data data`;
const load = `${gateway('load')} x.swb`;
const start = `${gateway('run')} --bundle x.swb --broker mqtt://127.0.0.1:1 --log silent`;
const show = 'stillwell show x.swb --key author.pub';
const seal = 'stillwell seal --candidate first.swc --key author.key --out new.swb';

const bundles: Record<string, Case> = {
  'a missing file': { line: show, says: [/x\.swb: expected a bundle .* got no such file; check the path/] },
  'an empty file': { line: load, files: { 'x.swb': '' }, says: [/x\.swb: the file is empty/] },
  'a folder': { line: start, files: { 'x.swb': null }, says: [/x\.swb: expected a file, got a folder/] },
  'a picture, shown': {
    line: show,
    files: { 'x.swb': PICTURE },
    says: [/x\.swb: expected a bundle.*neither.*right file/],
  },
  'a picture, loaded': {
    line: load,
    files: { 'x.swb': PICTURE },
    says: [/no sealed bundle; give one that `stillwell seal`/],
  },
  'cut in the header': { line: load, files: { 'x.swb': good.subarray(0, 40) }, says: [/cut short; get it again/] },
  'cut in the signature': { line: show, files: { 'x.swb': good.subarray(0, 100) }, says: [/cut short; get it again/] },
  'cut by one byte': { line: start, files: { 'x.swb': good.subarray(0, -1) }, says: [/cut short; get it again/] },
  'one byte too many': {
    line: load,
    files: { 'x.swb': Uint8Array.of(...good, 0) },
    says: [/something follows.*get it again/],
  },
  'a bit turned in the sequence': {
    line: start,
    files: { 'x.swb': turned(22) },
    says: [/does not hold.*get it again/],
  },
  'a bit turned in the signature': {
    line: show,
    files: { 'x.swb': turned(80) },
    says: [/does not hold.*get it again/],
  },
  'a bit turned in the document': { line: load, files: { 'x.swb': turned(900) }, says: [/SHA-256.*get it again/] },
  'a candidate where a bundle is wanted': {
    line: load,
    files: { 'x.swb': documentOf() },
    says: [/no sealed bundle; give one that `stillwell seal` wrote/],
  },
  'a predecessor with a bit turned': {
    line: `${seal} --after x.swb`,
    files: { 'x.swb': turned(22) },
    says: [/--after x\.swb: .*does not hold.*get it again/],
  },
};

const keys: Record<string, Case> = {
  'a key that does not match, shown': {
    line: show.replace('author.pub', 'other.pub'),
    files: { 'x.swb': good },
    says: [/x\.swb: .*expected a signature by a trusted author key.*give the key that it was sealed with/],
  },
  'a key that does not match, loaded': {
    line: load.replace('author.pub', 'other.pub'),
    files: { 'x.swb': good },
    says: [/x\.swb: refused \(signature\).*give the key that it was sealed with/],
  },
  'a private key on a gateway': {
    line: load.replace('author.pub', 'author.key'),
    files: { 'x.swb': good },
    says: [/author\.key: expected the public half of an author key, got the private one; keep that off the gateway/],
  },
  'a public key to seal with': {
    line: seal.replace('author.key', 'author.pub'),
    says: [/author\.pub: expected a private key to sign with, got the public half; give the file/],
  },
  'a key of another kind': {
    line: seal.replace('author.key', 'rollout.key'),
    says: [/rollout\.key: expected an author key to seal with, got a rollout key; give another/],
  },
  'a broken key file': {
    line: 'stillwell keys show x.key',
    files: { 'x.key': '{"kind":"author"' },
    says: [
      /x\.key: expected a key file \(JSON text\), got something else; give a file that `stillwell keys new` wrote/,
    ],
  },
};

const places: Record<string, Case> = {
  'an output that is there': {
    line: 'stillwell keys new --out old.key',
    files: { 'old.key': 'precious' },
    says: [/old\.key is there already; add --force to replace it, or give another --out/],
  },
  'a public half that a folder stands for: no private half either': {
    line: 'stillwell keys new --force --out new.key',
    files: { 'new.pub': null },
    says: [/cannot write new\.pub: a folder stands there; give another place/],
  },
  'a file where a folder is wanted': {
    line: 'stillwell keys new --out first.swb/new.key',
    says: [/cannot write first\.swb\/new\.key: a file stands where a folder is wanted; give another place/],
  },
  'a data folder that is a file': {
    line: load.replace('--data data', '--data site.yaml'),
    files: { 'x.swb': good },
    says: [/data folder site\.yaml: cannot be written.*give another with --data/],
  },
  'the same, to run in': {
    line: start.replace('--data data', '--data site.yaml'),
    files: { 'x.swb': good },
    says: [/data folder site\.yaml: cannot be written.*give another with --data/],
  },
  'the data folder of no gateway': {
    line: 'stillwell-gateway status --data data',
    files: { 'data/status.json': 'hello' },
    says: [/data\/status\.json: .*expected JSON.*writes it anew/],
  },
  'a gateway on the data folder of a desk': {
    line: load,
    files: { 'x.swb': good, 'data/desk.db': 'a store' },
    says: [/data folder data: expected that of a gateway, got a desk's .*give another with --data/],
  },
  'a desk on the data folder of a gateway': {
    line: 'stillwell desk --data data --broker mqtt://127.0.0.1:1',
    files: { 'data/identity.json': '{}' },
    says: [/data: expected the data folder of a desk, got a gateway's .*give another with --data/],
  },
  'a picture for a certificate': {
    line: 'stillwell-gateway check --site site.yaml --trust author.pub --broker mqtts://127.0.0.1:1 --authority x.pem',
    files: { 'x.pem': PICTURE },
    says: [/certificate authority x\.pem: expected PEM text .*got something else; give the file/],
  },
  'an author key for a key of TLS': {
    line: 'stillwell-gateway check --site site.yaml --trust author.pub --broker mqtts://127.0.0.1:1 --key author.key',
    says: [/client key author\.key: expected PEM text .*got something else; give the file/],
  },
  'the data folder of no desk': {
    line: 'stillwell refit --archive data --site site.yaml --out out',
    files: { 'data/identity.json': '{}' },
    says: [/data: expected the data folder of a desk .*give the folder that `stillwell desk --data` writes to/],
  },
};

describe('refused in one line, exit code 2, nothing written', () => {
  it.each(Object.entries({ ...bundles, ...keys, ...places }))('%s', (_, one) => folders.refuse(one, always), 120_000);

  it('cut at any of many lengths, with a bit turned at any of many places', async () => {
    for (let n = 1; n <= 24; n++) {
      const at = Math.floor((good.length * (n - 0.5)) / 24);
      const cut = { 'x.swb': good.subarray(0, at) };
      await folders.refuse(
        { line: n % 2 === 0 ? show : load, files: cut, says: [/x\.swb: .*cut short; get it again/] },
        always,
      );
      // Below byte 56 stand numbers and digest of the envelope, each refused in its own words.
      const says = [at < 56 ? /x\.swb: .*expected/ : /x\.swb: .*(altered|expected)/];
      await folders.refuse({ line: n % 2 === 0 ? load : show, files: { 'x.swb': turned(at) }, says }, always);
    }
  }, 120_000);

  // The system's own way of making a folder and those above it never ends there.
  it.runIf(existsSync('/proc/self'))(
    'a place below /proc',
    async () => {
      await folders.refuse({
        line: 'stillwell keys new --out /proc/none/new.key',
        says: [/cannot write \/proc\/none: there is no such folder and none can be made; give another/],
      });
      const line = 'stillwell-gateway load first.swb --site site.yaml --trust author.pub --data /proc/none';
      await folders.refuse(
        { line, says: [/data folder \/proc\/none: cannot be written \(ENOENT\); give another/] },
        always,
      );
    },
    120_000,
  );
});

it('the good bundle with its key is shown and loaded', async () => {
  const folder = folders.make({ ...always, 'x.swb': good });
  const shown = await folders.run(show, folder);
  expect(shown).toMatchObject({ code: 0, err: '' });
  expect(shown.out).toMatch(/signature holds/);
  expect(await folders.run(load, folder)).toMatchObject({ code: 0, err: '' });
  expect(Object.keys(contentsOf(join(folder, 'data/slots'))).some((path) => path.endsWith('a.swb'))).toBe(true);
}, 120_000);

it('a candidate whose probe comes out otherwise is shown, with exit code 1', async () => {
  const { probe, ...rest } = decodeBundle(documentOf());
  const altered = encodeBundle({ ...rest, probe: { ...probe, digest: new Uint8Array(32) } });
  const folder = folders.make({ 'x.swc': altered, 'first.swc': documentOf() });
  const shown = await folders.run('stillwell show x.swc', folder);
  expect(shown).toMatchObject({ code: 1, err: '' });
  expect(shown.out).toMatch(/Probe: DOES NOT HOLD: .*; the file is damaged, get it again or fit again\n/);
  const { code, out } = await folders.run('stillwell show x.swc --json', folder);
  expect(code).toBe(1);
  expect(JSON.parse(out).probe).toMatch(/differ from the stated ones/);
  expect(await folders.run('stillwell show first.swc', folder)).toMatchObject({ code: 0, err: '' });
}, 120_000);
