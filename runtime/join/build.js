/**
 * `npm run pack`: makes of the compiled gateway one file that holds every library it uses, and of that an archive which npm
 * installs without a network. In joined/: stillwell-gateway.mjs, the licences of what is in it, the unit for systemd, the
 * page on installing, and stillwell-gateway-VERSION.tgz with all of them.
 *
 * Names within the file are kept: without them the record of a loop that hung would say nothing.
 */
import { execFileSync } from 'node:child_process';
import {
  chmodSync,
  copyFileSync,
  mkdirSync,
  readdirSync,
  readFileSync,
  renameSync,
  rmSync,
  writeFileSync,
} from 'node:fs';
import { dirname, join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { rolldown } from 'rolldown';
import { noticesOf, packagesOf, requiredYaml } from './libraries.js';

const at = (path) => fileURLToPath(new URL(path, import.meta.url));
const ROOT = at('../..');
/** Where it goes; tests name a folder of their own. */
const JOINED = process.argv[2] ?? at('../joined');
const PROGRAM = 'stillwell-gateway.mjs';
/** What goes along as it is. */
const COPIED = ['install.md', 'service/stillwell-gateway.service'].map((path) => at(`../${path}`));

/** The launcher's first line: it passes V8's flags for small machines. */
function firstLine() {
  return readFileSync(at('../stillwell-gateway.js'), 'utf8').split('\n')[0];
}

/** Writes the program; gives the modules that are in it. */
async function joinInto(folder) {
  const bundle = await rolldown({
    input: at('../dist/cli.js'),
    platform: 'node',
    plugins: [requiredYaml, withoutFirstLine, unreachable],
    onLog: (_level, { message }) => {
      throw new Error(`Joining the gateway: ${message}`);
    },
  });
  const file = join(folder, PROGRAM);
  const { output } = await bundle.write({
    file,
    codeSplitting: false,
    banner: firstLine(),
    minify: { compress: true, mangle: false, codegen: true },
    comments: { legal: false, annotation: false, jsdoc: false },
  });
  await bundle.close();
  writeFileSync(file, inAscii(readFileSync(file, 'utf8')));
  if (output.length !== 1) throw new Error(`Joining the gateway: expected one file, got ${output.length}`);
  chmodSync(file, 0o755);
  return output[0].moduleIds;
}

/** The compiled entry has a first line of its own. */
const withoutFirstLine = {
  name: 'without-first-line',
  transform: { filter: { id: /runtime\/dist\/cli\.js$/ }, handler: (code) => code.replace(/^#!.*\n/, '') },
};

/** The MQTT client's ways to brokers that a gateway has no addresses for: web sockets and SOCKS (mqtt/stream.ts opens its own). */
const unreachable = {
  name: 'unreachable',
  resolveId: { filter: { id: /^(ws|socks)$/ }, handler: (id) => `\0unreachable:${id}` },
  load: { filter: { id: /^\0unreachable:/ }, handler: () => 'module.exports = {};' },
};

/** V8 keeps a source with one letter beyond Latin-1 in two bytes a letter: megabytes, for a few dashes and quotes. */
function inAscii(code) {
  return code.replace(/[^\0-\x7f]/g, (letter) => `\\u${letter.charCodeAt(0).toString(16).padStart(4, '0')}`);
}

/** A package that depends on nothing. */
function manifest() {
  const { version, license } = JSON.parse(readFileSync(at('../package.json'), 'utf8'));
  const { engines } = JSON.parse(readFileSync(join(ROOT, 'package.json'), 'utf8'));
  return {
    name: 'stillwell-gateway',
    version,
    description: 'Live state and forecasts of a small unattended site over MQTT. Advisory only.',
    license,
    type: 'module',
    bin: { 'stillwell-gateway': `./${PROGRAM}` },
    engines,
  };
}

async function build() {
  const folder = `${JOINED}.${process.pid}.part`;
  mkdirSync(folder, { recursive: true });
  try {
    const modules = await joinInto(folder);
    const bundler = dirname(fileURLToPath(import.meta.resolve('rolldown/package.json')));
    writeFileSync(join(folder, 'LICENSES.txt'), noticesOf([...packagesOf(modules), bundler]));
    writeFileSync(join(folder, 'package.json'), `${JSON.stringify(manifest(), null, 2)}\n`);
    copyFileSync(join(ROOT, 'LICENSE'), join(folder, 'LICENSE'));
    for (const file of COPIED) copyFileSync(file, join(folder, file.split('/').at(-1)));
    execFileSync('npm', ['pack', '--silent', '--offline'], { cwd: folder, stdio: ['ignore', 'ignore', 'inherit'] });
    rmSync(JOINED, { recursive: true, force: true });
    renameSync(folder, JOINED);
  } finally {
    rmSync(folder, { recursive: true, force: true });
  }
  process.stdout.write(
    `${join(
      JOINED,
      readdirSync(JOINED).find((name) => name.endsWith('.tgz')),
    )}\n`,
  );
}

await build();
