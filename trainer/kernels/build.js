/**
 * Builds kernels.wasm from assembly/ and lays it beside the sources, where tests load it, and beside the compiled code.
 * A file built from the same sources by the same compiler is kept: its own digest says so (the layout is in load.ts).
 */
import { spawnSync } from 'node:child_process';
import { createHash } from 'node:crypto';
import { mkdirSync, readdirSync, readFileSync, renameSync, rmSync, writeFileSync } from 'node:fs';
import { createRequire } from 'node:module';
import { dirname } from 'node:path';
import { fileURLToPath } from 'node:url';

const at = (path) => fileURLToPath(new URL(path, import.meta.url));
const targets = [at('kernels.wasm'), at('../dist/kernels/kernels.wasm')];
const options = [
  ...['--runtime', 'stub', '--importMemory', '--noExportMemory', '--enable', 'simd', '--use', 'abort='],
  ...['-O3', '--noAssert', '--converge'],
];
const NAME = 'stillwell.digest';
const SECTION = 3 + NAME.length + 64; // fits one byte of length

const sha256 = (...parts) => parts.reduce((hash, part) => hash.update(part), createHash('sha256')).digest();

/** What the file is made from: sources, compiler, its options. */
function sourceDigest(compilerVersion) {
  const files = readdirSync(at('assembly'))
    .filter((name) => name.endsWith('.ts'))
    .sort();
  const parts = files.flatMap((name) => [name, '\0', readFileSync(at(`assembly/${name}`)), '\0']);
  return sha256(compilerVersion, '\0', options.join(' '), '\0', ...parts);
}

/** True for a whole file that was built from these sources. */
function isCurrent(path, source) {
  try {
    const bytes = readFileSync(path);
    const end = bytes.length - SECTION;
    if (end < 8) return false;
    return bytes.subarray(-64, -32).equals(source) && bytes.subarray(-32).equals(sha256(bytes.subarray(0, end)));
  } catch {
    return false;
  }
}

/** A custom section: id 0, length, name, the digest of the sources and that of every byte before the section. */
function withDigest(module, source) {
  const head = Buffer.from([0, SECTION - 2, NAME.length]);
  return Buffer.concat([module, head, Buffer.from(NAME, 'latin1'), source, sha256(module)]);
}

function write(path, bytes) {
  mkdirSync(dirname(path), { recursive: true });
  const beside = `${path}.${process.pid}.part`;
  writeFileSync(beside, bytes);
  renameSync(beside, path);
}

const packages = createRequire(import.meta.url);
const { version } = packages('assemblyscript/package.json');
const source = sourceDigest(version);
if (!isCurrent(targets[0], source)) {
  const made = `${targets[0]}.${process.pid}.made`;
  const compiler = packages.resolve('assemblyscript/bin/asc.js');
  const run = spawnSync(process.execPath, [compiler, at('assembly/index.ts'), ...options, '-o', made], {
    stdio: ['ignore', 'inherit', 'inherit'],
  });
  if (run.status !== 0) {
    rmSync(made, { force: true });
    throw new Error(`The compiler of trainer/kernels/assembly ended with ${run.status ?? run.signal ?? run.error}.`);
  }
  const module = readFileSync(made);
  rmSync(made);
  write(targets[0], withDigest(module, source));
}
const bytes = readFileSync(targets[0]);
for (const target of targets.slice(1)) if (!isCurrent(target, source)) write(target, bytes);
