/**
 * What a gateway is started with: options checked once, files read once, each refusal one sentence with file and field.
 */
import { createPrivateKey, X509Certificate } from 'node:crypto';
import { hostname } from 'node:os';
import { join } from 'node:path';
import {
  isKeyPair,
  isName,
  NAME_RULE,
  ProtocolError,
  parseKey,
  parseSite,
  type Site,
  type TrustedKeys,
  toName,
} from '@stillwell/protocol';
import { dataFolderOf } from './data-folders.ts';
import type { Disk } from './disk.ts';
import { RuntimeError } from './errors.ts';
import { parseBrokerUrl, type TlsOptions } from './mqtt/stream.ts';

/** When ticks close: by the wall clock, or by the times of the readings alone (replays, accelerated plants). */
export type ClockKind = 'wall' | 'readings';

/** How to reach the broker and be let in. */
export interface BrokerConfig {
  readonly url: string;
  readonly protocol: 'auto' | 4 | 5;
  readonly username: string | null;
  readonly password: string | null;
  readonly tls: TlsOptions;
}

/** Everything a gateway is started with, checked. */
export interface GatewayConfig {
  readonly site: Site;
  readonly gateway: string;
  /** Absolute or relative path of the data folder. */
  readonly data: string;
  readonly broker: BrokerConfig;
  readonly trusted: TrustedKeys;
  readonly clock: ClockKind;
  readonly segmentTicks: number;
  readonly spoolBytes: number;
  readonly healthSeconds: number;
}

/** Options as the command line gives them; numbers still text. */
export interface RawOptions {
  readonly site: string;
  readonly data: string;
  readonly broker: string;
  readonly trust: readonly string[];
  readonly gateway?: string;
  readonly clock?: string;
  readonly protocol?: string;
  readonly segmentTicks?: string;
  readonly spoolMib?: string;
  readonly healthSeconds?: string;
  readonly username?: string;
  readonly passwordFile?: string;
  readonly authority?: string;
  readonly certificate?: string;
  readonly key?: string;
}

/** The same for several sites, each with a data folder of its own. */
export interface RawSitesOptions extends Omit<RawOptions, 'site'> {
  readonly site: readonly string[];
}

const DEFAULT_SPOOL_MIB = 32;
const DEFAULT_HEALTH_SECONDS = 60;
const HOUR_MS = 3_600_000;

/** throws  RuntimeError or ProtocolError, each with one sentence that says what to mend */
export function readConfig(disk: Disk, raw: RawOptions): GatewayConfig {
  const site = readSite(disk, raw.site);
  const gateway = raw.gateway ?? toName(hostname());
  if (!isName(gateway)) throw new RuntimeError('options', `--gateway "${gateway}": expected ${NAME_RULE}`);
  parseBrokerUrl(raw.broker);
  return {
    site,
    gateway,
    data: raw.data,
    broker: readBroker(disk, raw),
    trusted: readTrust(disk, raw.trust),
    clock: oneOf('--clock', raw.clock ?? 'wall', ['wall', 'readings']),
    segmentTicks: whole('--segment-ticks', raw.segmentTicks, defaultSegmentTicks(site.tickMs), 1, 65_536),
    spoolBytes: whole('--spool-mib', raw.spoolMib, DEFAULT_SPOOL_MIB, 1, 65_536) * 1024 * 1024,
    healthSeconds: whole('--health-seconds', raw.healthSeconds, DEFAULT_HEALTH_SECONDS, 1, 86_400),
  };
}

/** As readConfig, for every site. throws  RuntimeError 'options' where two files name the same site */
export function readConfigs(disk: Disk, raw: RawSitesOptions): readonly GatewayConfig[] {
  const configs = raw.site.map((site) => readConfig(disk, { ...raw, site }));
  checkSites(
    configs.map(({ site }) => site),
    raw.site,
  );
  return configs.map((config) => ({
    ...config,
    data: dataFolderOf(disk, raw.data, config.site.site, configs.length),
  }));
}

/** throws  RuntimeError 'options' where there is no site file, or two name the same site */
export function checkSites(sites: readonly Site[], paths: readonly string[]): void {
  if (sites.length === 0) throw new RuntimeError('options', '--site: expected at least one site file, got none');
  sites.forEach(({ root, site }, i) => {
    const first = sites.findIndex((one) => one.site === site && one.root === root);
    if (first < i)
      throw new RuntimeError(
        'options',
        `--site: ${paths[first]} and ${paths[i]} both are of site "${site}"; give each site once, or name one of them otherwise`,
      );
  });
}

/** An hour's worth, but at least 60 so that head and coder start-up are spread, and at most 3600. */
export function defaultSegmentTicks(tickMs: number): number {
  return Math.min(3600, Math.max(60, Math.round(HOUR_MS / tickMs)));
}

/** Reads and checks a site file; throws  RuntimeError 'file', ProtocolError 'site-file' */
export function readSite(disk: Disk, path: string): Site {
  const site = parseSite(readText(disk, path, 'site file'), path);
  const silent = site.signals.filter((signal) => signal.topic === null);
  if (silent.length === site.signals.length)
    throw new RuntimeError(
      'file',
      `${path}: no signal has a topic, so a gateway would hear nothing; add "topic:" to the signals to run this site`,
    );
  return site;
}

/** Reads public author keys; throws  RuntimeError 'keys' or 'file', ProtocolError 'key' */
export function readTrust(disk: Disk, paths: readonly string[]): TrustedKeys {
  if (paths.length === 0)
    throw new RuntimeError('keys', '--trust: expected at least one public author key file, got none');
  return paths.map((path) => {
    const key = parseKey(readText(disk, path, 'key file'), path);
    // Whoever reads this disk could seal bundles with it; better no gateway than one that carries it.
    if (isKeyPair(key))
      throw new RuntimeError(
        'keys',
        `${path}: expected the public half of an author key, got the private one; keep that off the gateway and give the .pub file beside it`,
      );
    if (key.kind !== 'author')
      throw new RuntimeError(
        'keys',
        `${path}: expected an author key, got a ${key.kind} key; bundles are sealed by authors`,
      );
    return { kind: key.kind, publicKey: key.publicKey };
  });
}

/** Reads a file that the person named; throws  RuntimeError 'file' */
export function readGiven(disk: Disk, path: string, what: string): Uint8Array {
  let bytes: Uint8Array | null;
  try {
    bytes = disk.read(path);
  } catch (cause) {
    const code = (cause as { code?: string }).code ?? 'unreadable';
    const why = code === 'EISDIR' ? 'expected a file, got a folder' : `cannot be read (${code})`;
    throw new RuntimeError('file', `${what} ${path}: ${why}`, { cause });
  }
  if (bytes === null) throw new RuntimeError('file', `${what} ${path}: no such file`);
  if (bytes.length === 0) throw new RuntimeError('file', `${what} ${path}: the file is empty`);
  return bytes;
}

/** Store of a desk: its folder is not for a gateway, though both could write there. */
const DESK_STORE = 'desk.db';

/** Makes the data folder; throws  RuntimeError 'data-folder' */
export function makeDataFolder(disk: Disk, folder: string): void {
  if (disk.size(join(folder, DESK_STORE)) > 0)
    throw new RuntimeError(
      'data-folder',
      `data folder ${folder}: expected that of a gateway, got a desk's (with ${DESK_STORE} inside); give another with --data`,
    );
  try {
    disk.makeFolder(folder);
    const probe = join(folder, '.probe.part');
    disk.write(probe, new Uint8Array(1));
    disk.remove(probe);
  } catch (cause) {
    const code = (cause as { code?: string }).code ?? 'error';
    throw new RuntimeError(
      'data-folder',
      `data folder ${folder}: cannot be written (${code}); give another with --data`,
      {
        cause,
      },
    );
  }
}

function readText(disk: Disk, path: string, what: string): string {
  const bytes = readGiven(disk, path, what);
  try {
    return new TextDecoder('utf-8', { fatal: true }).decode(bytes);
  } catch (cause) {
    throw new RuntimeError('file', `${what} ${path}: expected text in UTF-8, got other bytes`, { cause });
  }
}

function readBroker(disk: Disk, raw: RawOptions): BrokerConfig {
  const protocol = oneOf('--protocol', raw.protocol ?? 'auto', ['auto', '3.1.1', '5']);
  const password = raw.passwordFile === undefined ? null : readText(disk, raw.passwordFile, 'password file');
  return {
    url: raw.broker,
    protocol: protocol === 'auto' ? 'auto' : protocol === '5' ? 5 : 4,
    username: raw.username ?? null,
    password: password === null ? null : password.replace(/\r?\n$/, ''),
    tls: {
      authority: readPem(disk, raw.authority, 'certificate authority'),
      certificate: readPem(disk, raw.certificate, 'client certificate'),
      key: readPem(disk, raw.key, 'client key'),
    },
  };
}

/** A file for TLS, tried alone: later the platform would say what is wrong without saying where. */
function readPem(
  disk: Disk,
  path: string | undefined,
  what: 'certificate authority' | 'client certificate' | 'client key',
): Uint8Array | null {
  if (path === undefined) return null;
  const bytes = readGiven(disk, path, what);
  const pem = Buffer.from(bytes);
  try {
    if (what === 'client key') createPrivateKey(pem);
    else new X509Certificate(pem);
  } catch (cause) {
    throw new RuntimeError(
      'file',
      `${what} ${path}: expected PEM text ("-----BEGIN …"), got something else; give the file that the broker's keeper made`,
      { cause },
    );
  }
  return bytes;
}

function oneOf<T extends string>(option: string, value: string, known: readonly T[]): T {
  const found = known.find((one) => one === value);
  if (found === undefined)
    throw new RuntimeError('options', `${option}: expected ${known.join(' or ')}, got "${value}"`);
  return found;
}

function whole(option: string, text: string | undefined, byDefault: number, least: number, most: number): number {
  if (text === undefined) return byDefault;
  const value = /^\d+$/.test(text) ? Number(text) : Number.NaN;
  if (value >= least && value <= most) return value;
  throw new RuntimeError('options', `${option}: expected a whole number from ${least} to ${most}, got "${text}"`);
}

/** Whether an error is one that the person can mend; the command line then exits with 2. */
export function isRefusal(error: unknown): error is RuntimeError | ProtocolError {
  return error instanceof RuntimeError || error instanceof ProtocolError;
}
