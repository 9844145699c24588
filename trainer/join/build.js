/**
 * Joins the compiled command line, and the libraries it uses, into a few files in joined/: resolving and compiling four
 * hundred small modules one by one takes longer than most commands do. Commands stay apart, each loaded when it is asked
 * for. What was joined from the same files is kept (current.js); a new one takes the place of the old one whole.
 *
 * Libraries with parts that are not JavaScript, or that start a file of their own, are left to Node. Licences of the others
 * go along in one file.
 */
import { cpSync, existsSync, readdirSync, readFileSync, renameSync, rmSync, writeFileSync } from 'node:fs';
import { dirname, join, relative, resolve } from 'node:path';
import { fileURLToPath } from 'node:url';
import { rolldown } from 'rolldown';
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

/** Loaded at its first use by a call that no bundler can follow; here by one that it can, and no sooner. */
const yamlJoined = {
  name: 'yaml-joined',
  transform: {
    filter: { id: /protocol\/dist\/yaml-library\.js$/ },
    handler(code) {
      const followed = code.replace("load('yaml')", "require('yaml')");
      if (followed === code)
        throw new Error('protocol/yaml-library.ts loads its library in a way unknown to build.js.');
      return followed;
    },
  },
};

/** Writes the joined files to a folder and tells which modules were read, and which of them are in what file. */
async function joinInto(folder) {
  const read = new Set();
  const watch = { name: 'watch', moduleParsed: ({ id }) => void read.add(id) };
  const bundle = await rolldown({
    input: Object.fromEntries(ENTRIES.map((name) => [name, join(DIST, `${name}.js`)])),
    platform: 'node',
    external: LEFT_OUT,
    plugins: [yamlJoined, watch],
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

/** Folder of the package that a module is from; null for a module of ours or of the bundler's own. */
function packageOf(id) {
  return /^.*\/node_modules\/(?:@[^/]+\/)?[^/]+(?=\/)/.exec(id)?.[0] ?? null;
}

function packagesOf(ids) {
  return [...new Set(ids.map(packageOf).filter((folder) => folder !== null))].sort();
}

/** The licences of the packages, each under its name and version. */
function noticesOf(packages) {
  return packages.map((folder) => {
    const { name, version } = JSON.parse(readFileSync(join(folder, 'package.json'), 'utf8'));
    const files = readdirSync(folder).filter((file) => /^(licen[cs]e|notice|copying)/i.test(file));
    if (files.length === 0) throw new Error(`${folder} has no licence to go along with the joined files.`);
    const texts = files.sort().map((file) => readFileSync(join(folder, file), 'utf8').trim());
    return `${name} ${version}\n\n${texts.join('\n\n')}\n`;
  });
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
    const notices = noticesOf([...packagesOf(kept), bundler]);
    writeFileSync(join(folder, 'LICENSES.txt'), notices.join(`\n${'-'.repeat(80)}\n\n`));
    const copied = join(folder, 'kernels.wasm');
    cpSync(WASM, copied);
    const inputs = [...recordsOf(read), ...manifestsOf([...packagesOf(read), bundler]), WASM, copied, at('build.js')];
    const rows = inputs.map((file) => rowOf(folder, relative(folder, file)));
    writeFileSync(join(folder, LIST), JSON.stringify(rows));
    rmSync(JOINED, { recursive: true, force: true });
    putInPlace(folder);
  } finally {
    rmSync(folder, { recursive: true, force: true });
  }
}

if (!isCurrent(JOINED) || !existsSync(join(JOINED, LIST))) await build();
