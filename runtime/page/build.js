/**
 * Builds client-text.ts, the page's script as one string, from client/: so that the compiled gateway, and a gateway built as
 * one file, carry the page inside and read no file for it. A text built from the same sources is kept: its digest says so;
 * with --check nothing is built and the exit code tells whether it is.
 */
import { createHash } from 'node:crypto';
import { readdirSync, readFileSync, renameSync, writeFileSync } from 'node:fs';
import { createRequire } from 'node:module';
import { fileURLToPath, pathToFileURL } from 'node:url';

const at = (path) => fileURLToPath(new URL(path, import.meta.url));
const target = at('client-text.ts');
const packages = createRequire(import.meta.url);

/** What the text is made from: sources and bundler. */
function sourceDigest() {
  const { version } = packages('vite/package.json');
  const hash = createHash('sha256').update(version);
  const files = readdirSync(at('client'))
    .filter((name) => name.endsWith('.ts'))
    .sort();
  for (const name of files) hash.update(`\0${name}\0`).update(readFileSync(at(`client/${name}`)));
  return hash.digest('hex').slice(0, 16);
}

function isCurrent(digest) {
  try {
    return readFileSync(target, 'utf8').includes(`sources ${digest}.`);
  } catch {
    return false;
  }
}

const digest = sourceDigest();
if (process.argv.includes('--check')) process.exitCode = isCurrent(digest) ? 0 : 1;
else if (!isCurrent(digest)) {
  const { build } = await import(pathToFileURL(packages.resolve('vite')).href);
  const made = await build({
    configFile: false,
    logLevel: 'warn',
    root: at('.'),
    build: {
      write: false,
      target: 'es2022',
      minify: true,
      lib: { entry: at('client/main.ts'), formats: ['iife'], name: 'page' },
    },
  });
  const { code } = (Array.isArray(made) ? made[0] : made).output[0];
  if (/<\/script|<!--/i.test(code))
    throw new Error('runtime/page/client: its text would end the script element it stands in');
  const text = `/** Made by build.js from client/, sources ${digest}. Not to be changed by hand. */\nexport const CLIENT_TEXT =\n  ${JSON.stringify(code.trim())};\n`;
  const beside = `${target}.${process.pid}.part`;
  writeFileSync(beside, text);
  renameSync(beside, target);
}
