/** The import rules of DEVELOPERS.md, proved by planting each forbidden edge and seeing the linter refuse it. */
import { spawnSync } from 'node:child_process';
import { copyFileSync, mkdirSync, mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { dirname, join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { afterAll, beforeAll, describe, expect, test } from 'vitest';

const root = fileURLToPath(new URL('../..', import.meta.url));
const biome = join(root, 'node_modules/@biomejs/biome/bin/biome');

/** File, what it imports, whether the rules allow it. */
const edges: readonly (readonly [string, string, boolean])[] = [
  ['protocol/planted-runtime.ts', '@stillwell/runtime', false],
  ['protocol/planted-filter.ts', '@stillwell/runtime/filter', false],
  ['protocol/planted-fs.ts', 'node:fs', false],
  ['protocol/planted-msgpack.ts', 'msgpackr', false],
  ['protocol/segment/planted-msgpack.ts', 'msgpackr', false],
  ['protocol/planted-unpack.ts', 'msgpackr/unpack', false],
  ['protocol/codec.ts', 'msgpackr/unpack', true],
  ['protocol/planted-zod.ts', 'zod', true],
  ['runtime/filter/planted-up.ts', '../files.ts', false],
  ['runtime/filter/planted-fs.ts', 'node:fs', false],
  ['runtime/filter/planted-beside.ts', './bank.ts', true],
  ['runtime/filter/planted-protocol.ts', '@stillwell/protocol', true],
  ['runtime/planted-trainer.ts', '@stillwell/trainer', false],
  ['runtime/planted-mqtt.ts', 'mqtt', false],
  ['runtime/ingest/planted-source.ts', '../../protocol/codec.ts', false],
  ['runtime/mqtt/connection.ts', 'mqtt', true],
  ['trainer/planted-runtime.ts', '@stillwell/runtime', false],
  ['trainer/desk/planted-source.ts', '../../runtime/gateway.ts', false],
  ['trainer/planted-mqtt.ts', 'mqtt', false],
  ['trainer/planted-filter.ts', '@stillwell/runtime/filter', true],
  ['trainer/planted-connection.ts', '@stillwell/runtime/mqtt', true],
  ['trainer/planted-files.ts', '@stillwell/runtime/files', true],
  ['trainer/planted-demo.ts', '../demo-fleet/fleet.ts', false],
  ['demo-fleet/planted-test.ts', '../test/support/models.ts', false],
  ['demo-fleet/planted-trainer.ts', '@stillwell/trainer', true],
];

let folder: string;
let report: string;

beforeAll(() => {
  folder = mkdtempSync(join(tmpdir(), 'stillwell-imports-'));
  copyFileSync(join(root, '.biome.json'), join(folder, '.biome.json'));
  for (const [file, imported] of edges) {
    mkdirSync(dirname(join(folder, file)), { recursive: true });
    writeFileSync(join(folder, file), `import * as planted from '${imported}';\n\nexport const kept = planted;\n`);
  }
  const run = spawnSync(process.execPath, [biome, 'lint', '--reporter=json', '--max-diagnostics=none', '.'], {
    cwd: folder,
    encoding: 'utf8',
  });
  report = run.stdout + run.stderr;
});

afterAll(() => rmSync(folder, { recursive: true, force: true }));

describe('import rules', () => {
  test.each(edges)('%s importing %s: allowed is %s', (file, _imported, allowed) => {
    const start = report.indexOf('{"');
    const { diagnostics } = JSON.parse(report.slice(start, report.lastIndexOf('}') + 1)) as {
      diagnostics: { category: string; location: { path: string | { file: string } } }[];
    };
    const refused = diagnostics.some(
      (entry) =>
        entry.category === 'lint/style/noRestrictedImports' && JSON.stringify(entry.location).includes(`${file}"`),
    );
    expect(refused).toBe(!allowed);
  });
});
