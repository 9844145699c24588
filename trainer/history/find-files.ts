/**
 * From what was named to the files themselves: a file stands for itself, a folder for the history files below it, a
 * pattern (`*`, `**`, `?`, `[a-z]`, `{a,b}`) for what it matches. In folders that are parted by KEY=VALUE, site=NAME keeps
 * other sites' files out; every other key is passed over, since the files say it all.
 */
import { existsSync, readdirSync, statSync } from 'node:fs';
import { join, sep } from 'node:path';
import { TrainError } from '../errors.ts';

const HISTORY = /\.(csv|tsv|txt|ndjson|jsonl|json|parquet|pq)(\.(gz|zst))?$/i;
const ENDINGS = '.csv, .tsv, .txt, .ndjson, .jsonl, .json or .parquet, the text ones also .gz or .zst';
const PATTERN = /[*?[{]/;

/**
 * Files in the order of their names within each folder or pattern.
 *
 * siteName  whose files, where folders say so; null: anybody's
 * throws    TrainError 'file' where a folder or pattern holds none, in one sentence
 */
export function findFiles(paths: readonly string[], siteName: string | null): string[] {
  return paths.flatMap((path) => {
    const status = statSync(path, { throwIfNoEntry: false });
    if (status === undefined && PATTERN.test(path)) return matched(path, siteName);
    if (status?.isDirectory()) return below(path, siteName);
    return [path];
  });
}

function below(folder: string, siteName: string | null): string[] {
  const found = filesIn(folder);
  const ours = found.filter((path) => isOurs(path.slice(folder.length), siteName));
  if (ours.length > 0) return ours;
  const got = found.length > 0 ? `only those of other sites than "${siteName}"` : 'none';
  throw new TrainError(
    'file',
    `${folder}: expected history files in this folder (${ENDINGS}), got ${got}; check the path`,
  );
}

/** History files of a folder and of those below it, by name; what begins with a dot or an underscore is not data. */
function filesIn(folder: string): string[] {
  let entries: import('node:fs').Dirent[];
  try {
    entries = readdirSync(folder, { withFileTypes: true });
  } catch (cause) {
    throw new TrainError('file', `${folder}: may not be looked into; check the folder's permissions`, { cause });
  }
  return entries
    .filter(({ name }) => !/^[._]/.test(name))
    .sort((a, b) => (a.name < b.name ? -1 : 1))
    .flatMap((entry) => {
      const path = join(folder, entry.name);
      const isFolder = entry.isSymbolicLink()
        ? statSync(path, { throwIfNoEntry: false })?.isDirectory()
        : entry.isDirectory();
      if (isFolder) return entry.isSymbolicLink() ? [] : filesIn(path);
      return HISTORY.test(entry.name) ? [path] : [];
    });
}

function isOurs(path: string, siteName: string | null): boolean {
  const named = /(?:^|[/\\])site=([^/\\]+)[/\\]/.exec(path)?.[1];
  return siteName === null || named === undefined || named === siteName;
}

function matched(pattern: string, siteName: string | null): string[] {
  const parts = pattern.split(/[/\\]/);
  const upTo = (count: number): string => parts.slice(0, count).join(sep) || (pattern.startsWith('/') ? sep : '');
  // Letters of a pattern in the name of a folder that is there are that name's.
  let fixed = 0;
  while (fixed < parts.length && (!PATTERN.test(parts[fixed] as string) || existsSync(upTo(fixed + 1)))) fixed++;
  if (fixed === parts.length) return [pattern];
  const from = upTo(fixed);
  const found = walk(from, parts.slice(fixed)).filter((path) => isOurs(path.slice(from.length), siteName));
  if (found.length > 0) return found;
  throw new TrainError('file', `${pattern}: expected history files that match this pattern, got none; check the path`);
}

/** Files below a folder whose path matches the rest of a pattern. */
function walk(folder: string, parts: readonly string[]): string[] {
  const [part = '', ...rest] = parts;
  let names: string[];
  try {
    names = readdirSync(folder === '' ? '.' : folder).sort();
  } catch {
    return [];
  }
  const isDeep = part === '**';
  const fits = isDeep ? null : expressionOf(part);
  const here = isDeep ? walk(folder, rest) : [];
  const found = names.flatMap((name) => {
    if (name.startsWith('.') || (fits !== null && !fits.test(name))) return [];
    const path = folder === '' ? name : join(folder, name);
    const status = statSync(path, { throwIfNoEntry: false });
    if (isDeep) return status?.isDirectory() ? walk(path, parts) : [];
    if (rest.length > 0) return status?.isDirectory() ? walk(path, rest) : [];
    return status?.isFile() ? [path] : status?.isDirectory() ? filesIn(path) : [];
  });
  return [...new Set([...here, ...found])].sort();
}

/** One level of a pattern. */
function expressionOf(part: string): RegExp {
  const text = part.replace(/\[[^\]]*\]|\{[^}]*\}|[*?]|[^\w]/g, (piece) => {
    if (piece === '*') return '[^/]*';
    if (piece === '?') return '[^/]';
    if (piece.length > 1 && piece.startsWith('[')) return piece.replace(/^\[!/, '[^').replaceAll('\\', '\\\\');
    if (piece.length > 1 && piece.startsWith('{')) return `(?:${piece.slice(1, -1).split(',').map(escaped).join('|')})`;
    return escaped(piece);
  });
  return new RegExp(`^${text}$`);
}

function escaped(text: string): string {
  return text.replace(/[^\w]/g, '\\$&');
}
