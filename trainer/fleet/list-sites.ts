/**
 * Which sites a fleet has: from a folder with one sub-folder a site, or from a fleet file. What is wrong with one site is
 * kept beside it and stops no other; what is wrong with the fleet file itself is refused at once.
 */
import { existsSync, readdirSync, statSync } from 'node:fs';
import { dirname, isAbsolute, join, resolve } from 'node:path';
import { type FleetEntryOptions, ProtocolError, parseFleetFile, type Site } from '@stillwell/protocol';
import { TrainError } from '../errors.ts';
import { findFiles } from '../history/find-files.ts';
import { readTextFile } from '../key-file.ts';
import { readSite } from '../site-file.ts';

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
  const resolved = (one: string): string => (isAbsolute(one) ? one : join(base, one));
  return parseFleetFile(text, path).map(({ site, history, options, line }) =>
    entry(resolved(site), history.map(resolved), options, `${path}:${line}: history: `),
  );
}

function fromFolder(folder: string, out: string): FleetList {
  const below = readdirSync(folder)
    .filter((name) => !name.startsWith('.'))
    .map((name) => join(folder, name))
    .filter((path) => statSync(path, { throwIfNoEntry: false })?.isDirectory() && resolve(path) !== resolve(out))
    .sort((a, b) => (a < b ? -1 : 1));
  const isSite = (path: string): boolean => existsSync(join(path, SITE_FILE)) || hasHistory(path);
  return {
    sites: below.filter(isSite).map((path) => entry(join(path, SITE_FILE), [path], {}, '')),
    passedOver: below.filter((path) => !isSite(path)),
  };
}

function hasHistory(folder: string): boolean {
  try {
    return findFiles([folder], null).length > 0;
  } catch {
    return false;
  }
}

/** A site with its files found; what is wrong with either is kept as the reason why it cannot be fitted. */
function entry(siteFile: string, named: readonly string[], options: FleetEntryOptions, where: string): FleetSite {
  const common = { siteFile, options, label: siteFile, history: [] };
  let site: Site;
  try {
    site = readSite(siteFile);
  } catch (error) {
    return { ...common, site: null, problem: refusalOf(error) };
  }
  try {
    return { ...common, label: site.site, site, history: findFiles(named, site.site), problem: null };
  } catch (error) {
    return { ...common, label: site.site, site, problem: where + refusalOf(error) };
  }
}

function refusalOf(error: unknown): string {
  if (error instanceof TrainError || error instanceof ProtocolError) return error.message;
  throw error;
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
