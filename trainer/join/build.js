/**
 * Joins the compiled command line, and the libraries it uses, into a few files in joined/: resolving and compiling four
 * hundred small modules one by one takes longer than most commands do. Commands stay apart, each loaded when it is asked
 * for. What was joined from the same files is kept (current.js); a new one takes the place of the old one whole.
 *
 * Libraries with parts that are not JavaScript, or that start a file of their own, are left to Node. Licences of the others
 * go along in one file.
 */
import { cpSync, existsSync, renameSync, rmSync, writeFileSync } from 'node:fs';
import { dirname, join, relative, resolve } from 'node:path';
import { fileURLToPath } from 'node:url';
import { rolldown } from 'rolldown';
import { noticesOf, packageOf, packagesOf, requiredYaml } from '../../runtime/join/libraries.js';
import { isCurrent, LIST, rowOf } from './current.js';

const at = (path) => fileURLToPath(new URL(path, import.meta.url));
const JOINED = at('../joined');
const DIST = at('../dist');
/** Named as in dist/, since they are started by their place there (compiled-file.ts). */
const ENTRIES = ['cli', 'threads/worker', 'fleet/worker'];
const LEFT_OUT = ['@duckdb/node-bindings', 'libsql', 'piscina'];
/** They find files by their own place, so they must come to lie at the top of joined/. */
const PLACED = ['compiled-file.js', 'kernels/load.js'].map((path) => join(DIST, path));
const WASM = join(DIST, 'kernels/kernels.wasm');

/** Writes the joined files to a folder and tells which modules were read, and which of them are in what file. */
async function joinInto(folder) {
  const read = new Set();
  const watch = { name: 'watch', moduleParsed: ({ id }) => void read.add(id) };
  const bundle = await rolldown({
    input: Object.fromEntries(ENTRIES.map((name) => [name, join(DIST, `${name}.js`)])),
    platform: 'node',
    external: LEFT_OUT,
    plugins: [requiredYaml, watch],
    onLog: (_level, { message }) => {
      throw new Error(`Joining the trainer: ${message}`);
    },
  });
  const { output } = await bundle.write({ dir: folder, comments: { legal: true, annotation: false, jsdoc: false } });
  await bundle.close();
  for (const { fileName, moduleIds } of output) {
    const lost = PLACED.find((id) => fileName.includes('/') && moduleIds.includes(id));
    if (lost !== undefined) throw new Error(`${lost} is in ${fileName}, from where it does not find its files.`);
  }
  return { read: [...read], kept: output.flatMap(({ moduleIds }) => moduleIds) };
}

/** Of the compiled files, what the compiler keeps beside them: it holds a digest of every source. */
function recordsOf(ids) {
  const own = ids.filter((id) => resolve(id) === id && packageOf(id) === null);
  return [...new Set(own.map((id) => id.replace(/(?<=[\\/]dist[\\/]).*$/, 'tsconfig.tsbuildinfo')))].sort();
}

/** Of a library, the file that names its version. */
function manifestsOf(packages) {
  return packages.map((folder) => join(folder, 'package.json'));
}

/** Another build may have put its own there meanwhile. */
function putInPlace(folder) {
  try {
    renameSync(folder, JOINED);
  } catch (error) {
    if (!isCurrent(JOINED)) throw error;
  }
}

/** Makes the joined folder anew. */
async function build() {
  const folder = `${JOINED}.${process.pid}.part`;
  const bundler = dirname(at(import.meta.resolve('rolldown/package.json')));
  try {
    const { read, kept } = await joinInto(folder);
    writeFileSync(join(folder, 'LICENSES.txt'), noticesOf([...packagesOf(kept), bundler]));
    const copied = join(folder, 'kernels.wasm');
    cpSync(WASM, copied);
    const inputs = [
      ...recordsOf(read),
      ...manifestsOf([...packagesOf(read), bundler]),
      WASM,
      copied,
      at('build.js'),
      at('../../runtime/join/libraries.js'),
    ];
    const rows = inputs.map((file) => rowOf(folder, relative(folder, file)));
    writeFileSync(join(folder, LIST), JSON.stringify(rows));
    rmSync(JOINED, { recursive: true, force: true });
    putInPlace(folder);
  } finally {
    rmSync(folder, { recursive: true, force: true });
  }
}

if (!isCurrent(JOINED) || !existsSync(join(JOINED, LIST))) await build();
