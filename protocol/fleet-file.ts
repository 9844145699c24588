/**
 * The fleet file: one YAML document that lists sites to be fitted together, each with its site file, its history and what it
 * wants otherwise than the rest. For the trainer alone.
 */
import { z } from 'zod';
import { BUNDLE_KINDS, type BundleKind } from './bundle.ts';
import { checked } from './checked-value.ts';
import { parseDuration } from './duration.ts';
import { deepFreeze } from './freeze.ts';
import { listFaults } from './issue.ts';
import { nearestName } from './nearest.ts';
import { readYamlFile, type YamlKind } from './yaml-file.ts';

/** What one site of a fleet wants otherwise than the command line says; absent: as there. */
export interface FleetEntryOptions {
  readonly timeZone?: string;
  readonly from?: string;
  readonly until?: string;
  readonly learnShare?: number;
  readonly calibrateShare?: number;
  /** ms */
  readonly halfLife?: number;
  readonly maxBytes?: number;
  readonly kind?: BundleKind | 'auto';
  readonly useAll?: boolean;
  readonly seed?: number;
  readonly override?: string;
}

/** One site of a fleet file; paths as written, relative to the fleet file. */
export interface FleetEntry {
  readonly site: string;
  /** Paths and patterns of history files, in the order to be read. */
  readonly history: readonly string[];
  readonly options: FleetEntryOptions;
  /** Line of the entry, from 1. */
  readonly line: number;
}

/** Sites of one file: far above what one desk looks after. */
const MOST_SITES = 10_000;
const MAX_FLEET_FILE_BYTES = 4 * 1024 * 1024;

const FLEET_FILE: YamlKind = {
  code: 'fleet-file',
  called: 'a fleet file',
  keys: 'sites',
  maxBytes: MAX_FLEET_FILE_BYTES,
};

const isText = (value: unknown): value is string => typeof value === 'string' && value.trim() !== '';
const text = (expected: string) => checked(expected, (value) => (isText(value) ? value : undefined));
const whole = (least: number, most: number) =>
  checked(`a whole number from ${least} to ${most}`, (value) =>
    Number.isSafeInteger(value) && (value as number) >= least && (value as number) <= most
      ? (value as number)
      : undefined,
  );
const share = checked('a share between 0 and 1', (value) =>
  typeof value === 'number' && value > 0 && value < 1 ? value : undefined,
);
const duration = checked('a duration such as "180d"', (value) =>
  typeof value === 'string' ? (parseDuration(value) ?? undefined) : undefined,
);
const truth = checked('true or false', (value) => (typeof value === 'boolean' ? value : undefined));
const history = checked('a path or pattern of history files, or a list of them', (value) => {
  const list = Array.isArray(value) ? value : [value];
  return list.length > 0 && list.every(isText) ? list : undefined;
});
const KINDS: readonly (BundleKind | 'auto')[] = ['auto', ...BUNDLE_KINDS];
const kind = checked(
  (value) => {
    const near = isText(value) ? nearestName(value, KINDS) : null;
    return `one of ${KINDS.join(', ')}${near === null ? '' : ` (did you mean "${near}"?)`}`;
  },
  (value) => KINDS.find((one) => one === value),
);

const entrySchema = z.strictObject({
  site: text('the path of a site file'),
  history,
  time_zone: text('an IANA time zone such as "Europe/Vienna" or "UTC"').nullish(),
  from: text('a time such as "2026-03-01"').nullish(),
  until: text('a time such as "2026-03-01"').nullish(),
  learn_share: share.nullish(),
  calibrate_share: share.nullish(),
  half_life: duration.nullish(),
  max_bytes: whole(2048, 65_536).nullish(),
  kind: kind.nullish(),
  use_all: truth.nullish(),
  seed: whole(0, 2 ** 32 - 1).nullish(),
  override: text('the reason in words').nullish(),
});

const fleetSchema = z.strictObject({ sites: z.array(entrySchema).min(1).max(MOST_SITES) });

const fleetKeys = (path: readonly PropertyKey[]): readonly string[] =>
  Object.keys(path.length === 0 ? fleetSchema.shape : entrySchema.shape);

const optionsOf = (entry: z.output<typeof entrySchema>): FleetEntryOptions => {
  const all = {
    timeZone: entry.time_zone,
    from: entry.from,
    until: entry.until,
    learnShare: entry.learn_share,
    calibrateShare: entry.calibrate_share,
    halfLife: entry.half_life,
    maxBytes: entry.max_bytes,
    kind: entry.kind,
    useAll: entry.use_all,
    seed: entry.seed,
    override: entry.override,
  };
  return Object.fromEntries(Object.entries(all).filter(([, value]) => value !== undefined && value !== null));
};

/**
 * Reads and checks a fleet file.
 *
 * throws  ProtocolError 'fleet-file': "file:line:col: sites[1].history: expected …, got …", with a suggestion for a mistyped key
 */
export const parseFleetFile = (contents: string, fileName = 'fleet file'): readonly FleetEntry[] => {
  const file = readYamlFile(contents, fileName, FLEET_FILE);
  const parsed = fleetSchema.safeParse(file.plain);
  if (!parsed.success) throw file.refusal(listFaults(parsed.error, file.plain, fleetKeys));
  return deepFreeze(
    parsed.data.sites.map((entry, i) => ({
      site: entry.site,
      history: entry.history,
      options: optionsOf(entry),
      line: file.lineOf(['sites', i]),
    })),
  );
};
