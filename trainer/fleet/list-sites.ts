/**
 * Which sites a fleet has: from a folder with one sub-folder a site, or from a fleet file. What is wrong with one site is
 * kept beside it and stops no other; what is wrong with the fleet file itself is refused at once.
 */
import { readdirSync, statSync } from 'node:fs';
import { dirname, join, resolve } from 'node:path';
import { type FleetEntryOptions, ProtocolError, parseFleetFile, type Site } from '@stillwell/protocol';
import { TrainError } from '../errors.ts';
import { readTextFile } from '../key-file.ts';
import { readSite } from '../site-file.ts';
import { filesBelow, matchFiles } from './match-files.ts';

/** A site of the fleet, or why it cannot be fitted. */
export interface FleetSite {
  /** The site's name; where its file cannot be read, where that was looked for. */
  readonly label: string;
  readonly siteFile: string;
  readonly history: readonly string[];
  readonly options: FleetEntryOptions;
  readonly site: Site | null;
  /** One sentence; null where all is well so far. */
  readonly problem: string | null;
}

/** Names that history files end in, packed or not. */
const HISTORY_NAME = /\.(csv|tsv|txt|ndjson|jsonl|parquet)(\.(gz|zst))?$/i;
/** Name of a site's file in its folder. */
const SITE_FILE = 'site.yaml';

/** Sites of a fleet, and sub-folders that hold none. */
export interface FleetList {
  readonly sites: readonly FleetSite[];
  readonly passedOver: readonly string[];
}

/**
 * Lists a fleet.
 *
 * out     folder for results, which is no site even where it lies in the fleet's folder
 * throws  TrainError 'file' where there is no such file or folder or no site in it, ProtocolError 'fleet-file' with line and field
 */
export function listSites(path: string, out: string): FleetList {
  const there = statSync(path, { throwIfNoEntry: false });
  const list = there?.isDirectory() ? fromFolder(path, out) : { sites: fromFile(path), passedOver: [] };
  if (list.sites.length === 0) {
    throw new TrainError(
      'file',
      `${path}: expected one sub-folder a site, each with ${SITE_FILE} and its history files, got none; make them, or give a fleet file`,
    );
  }
  return { ...list, sites: withoutTwins(list.sites) };
}

function fromFile(path: string): FleetSite[] {
  const text = readTextFile(path, 'a fleet file, or a folder with one sub-folder a site', 'check the path');
  const base = dirname(path);
  return parseFleetFile(text, path).map(({ site, history, options, line }) => {
    const siteFile = resolveFrom(base, site);
    const found = history.map((one) => ({ one, files: matchFiles(base, one).flatMap(inFolder) }));
    const empty = found.find(({ files }) => files.length === 0);
    const problem =
      empty === undefined
        ? null
        : `${path}:${line}: history: expected files that match ${JSON.stringify(empty.one)}, got none; mend the pattern`;
    return entry(siteFile, [...new Set(found.flatMap(({ files }) => files))], options, problem);
  });
}

/** A folder stands for the history files in and below it. */
function inFolder(path: string): string[] {
  if (!statSync(path, { throwIfNoEntry: false })?.isDirectory()) return [path];
  return filesBelow(path).filter((file) => HISTORY_NAME.test(file));
}

function resolveFrom(base: string, path: string): string {
  return path.startsWith('/') ? path : join(base, path);
}

function fromFolder(folder: string, out: string): FleetList {
  const sites: FleetSite[] = [];
  const passedOver: string[] = [];
  const below = readdirSync(folder, { withFileTypes: true })
    .map(({ name }) => join(folder, name))
    .filter((path) => !path.slice(folder.length).includes('/.') && statSync(path).isDirectory())
    .filter((path) => resolve(path) !== resolve(out))
    .sort((a, b) => (a < b ? -1 : 1));
  for (const path of below) {
    const siteFile = join(path, SITE_FILE);
    const history = filesBelow(path).filter((file) => HISTORY_NAME.test(file));
    const hasSite = statSync(siteFile, { throwIfNoEntry: false }) !== undefined;
    if (!hasSite && history.length === 0) passedOver.push(path);
    else sites.push(entry(siteFile, history, {}, history.length === 0 ? noHistory(path) : null));
  }
  return { sites, passedOver };
}

function noHistory(folder: string): string {
  return `${folder}: expected history files (.csv, .ndjson or .parquet, also packed) beside ${SITE_FILE}, got none; put them there, or list the site in a fleet file`;
}

function entry(
  siteFile: string,
  history: readonly string[],
  options: FleetEntryOptions,
  problem: string | null,
): FleetSite {
  const common = { siteFile, history, options };
  try {
    const site = readSite(siteFile);
    return { ...common, label: site.site, site, problem };
  } catch (error) {
    if (!(error instanceof TrainError) && !(error instanceof ProtocolError)) throw error;
    return { ...common, label: siteFile, site: null, problem: error.message };
  }
}

/** Sites of one name would share a folder, and perhaps a broker: neither is fitted. Letter case makes no other folder everywhere. */
function withoutTwins(sites: readonly FleetSite[]): FleetSite[] {
  const byName = new Map<string, FleetSite[]>();
  for (const one of sites) {
    if (one.site === null) continue;
    const key = one.label.toLowerCase();
    byName.set(key, [...(byName.get(key) ?? []), one]);
  }
  return sites.map((one) => {
    const twins = one.site === null ? [] : byName.get(one.label.toLowerCase());
    const other = twins?.find((twin) => twin !== one);
    if (other === undefined) return one;
    const where = other.siteFile === one.siteFile ? 'in the same site file again' : `in ${other.siteFile} as well`;
    return {
      ...one,
      problem: `${one.siteFile}: expected a site name of its own, got "${one.label}", which stands ${where}; rename one of them`,
    };
  });
}
