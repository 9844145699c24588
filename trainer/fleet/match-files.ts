/**
 * History files named by patterns, for fleet files, which no shell expands: `*` and `?` within a name, `**` for any folders.
 */
import { existsSync, readdirSync, statSync } from 'node:fs';
import { isAbsolute, join } from 'node:path';

/** Whether a path is meant as a pattern. A file that is there by that very name is taken as it is. */
function isPattern(path: string): boolean {
  return /[*?]/.test(path) && !existsSync(path);
}

function nameMatcher(pattern: string): RegExp {
  const source = pattern
    .replace(/[.+^${}()|[\]\\]/g, '\\$&')
    .replace(/\*/g, '[^/]*')
    .replace(/\?/g, '[^/]');
  return new RegExp(`^${source}$`, 'u');
}

/**
 * Names in a folder in order, hidden ones left out; none where there is no such folder. Links to files are followed, links
 * to folders are not: they may lead round in a circle.
 */
function namesIn(folder: string): { name: string; isFolder: boolean }[] {
  const here = folder === '' ? '.' : folder;
  if (!statSync(here, { throwIfNoEntry: false })?.isDirectory()) return [];
  return readdirSync(here, { withFileTypes: true })
    .filter(({ name }) => !name.startsWith('.'))
    .filter((entry) => !entry.isSymbolicLink() || statSync(join(here, entry.name), { throwIfNoEntry: false })?.isFile())
    .map((entry) => ({ name: entry.name, isFolder: entry.isDirectory() }))
    .sort((a, b) => (a.name < b.name ? -1 : 1));
}

/** Files at and below a folder, in order of their paths; hidden ones left out. */
export function filesBelow(folder: string): string[] {
  return namesIn(folder).flatMap(({ name, isFolder }) =>
    isFolder ? filesBelow(join(folder, name)) : [join(folder, name)],
  );
}

function walk(folder: string, parts: readonly string[]): string[] {
  const [part, ...rest] = parts as [string, ...string[]];
  if (part === '**') {
    const deeper = namesIn(folder).filter(({ isFolder }) => isFolder);
    const here = rest.length === 0 ? filesBelow(folder) : walk(folder, rest);
    return rest.length === 0 ? here : [...here, ...deeper.flatMap(({ name }) => walk(join(folder, name), parts))];
  }
  if (!/[*?]/.test(part)) {
    const path = join(folder, part);
    return rest.length > 0 ? walk(path, rest) : existsSync(path) ? [path] : [];
  }
  const matcher = nameMatcher(part);
  return namesIn(folder)
    .filter(({ name, isFolder }) => matcher.test(name) && isFolder === rest.length > 0)
    .flatMap(({ name }) => (rest.length > 0 ? walk(join(folder, name), rest) : [join(folder, name)]));
}

/**
 * Files that a path or pattern stands for, relative to `base`, in order of their paths. A plain path stands for itself,
 * there or not: who reads it says so best.
 */
export function matchFiles(base: string, path: string): string[] {
  const whole = isAbsolute(path) ? path : join(base, path);
  if (!isPattern(whole)) return [whole];
  const parts = whole.split('/');
  const found = parts[0] === '' ? walk('/', parts.slice(1)) : walk('', parts);
  return [...new Set(found)].sort((a, b) => (a < b ? -1 : 1));
}
