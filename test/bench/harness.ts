/**
 * What every bench suite shares: the row, how rows are printed, how a suite is found.
 *
 * To add a suite: write test/bench/SUITE.ts, named as in SUITES, exporting
 *
 *     export async function* rows(options: BenchOptions): AsyncIterable<Row> { … yield row({ … }) … }
 *
 * (a promise of an array will do), and nothing else is needed: run.ts looks for dist/SUITE.js. Import our packages by name
 * only. Give `case`, `unit`, `ours`, `better`; a peer measured in the same run as `peer` with `peerName`; a figure to be
 * held as `bar`. A peer that is not installed is not a failure: call `options.note` with the Debian package to install and
 * leave it out. Timings: `timed` repeats and gives the least and the mean ± sd. A suite exits 0 when it ran, whatever holds.
 */

export const SUITES = ['accuracy', 'training', 'gateway', 'segments', 'desk', 'faults'] as const;
export type SuiteName = (typeof SUITES)[number];

export interface BenchOptions {
  /** Folder with measured series (ETTh1.csv); null: seeded synthetic data instead. */
  readonly data: string | null;
  /** Only cases whose name holds this word, of suites that can leave cases out; null: all. */
  readonly only: string | null;
  /** Folder for profiles of our own side, of suites that can make them; null: none are made. */
  readonly profile: string | null;
  /** A plain line for people, on stderr under --json. */
  readonly note: (line: string) => void;
}

/**
 * One figure. `ratio` is ours/peer of the same run; `holds` whether ours is on the right side of `bar`, or the ratio, where the
 * peer is what is to be beaten.
 */
export interface Row {
  readonly suite: SuiteName;
  readonly case: string;
  readonly unit: string;
  readonly ours: number;
  readonly peer: number | null;
  readonly peerName: string | null;
  readonly ratio: number | null;
  readonly better: 'lower' | 'higher';
  readonly bar: number | null;
  readonly holds: boolean | null;
}

/** A suite's module. */
export interface Suite {
  rows(options: BenchOptions): AsyncIterable<Row> | Promise<readonly Row[]>;
}

/** True where a case, or a group of cases, by that name was asked for. */
export function isWanted({ only }: BenchOptions, name: string): boolean {
  return only === null || name.toLowerCase().includes(only.toLowerCase());
}

/** Fills in ratio and holds. The bar is on `ours`; `barOnRatio` puts it on the ratio, or on nothing where there is no peer. */
export function row(given: {
  suite: SuiteName;
  case: string;
  unit: string;
  ours: number;
  better: 'lower' | 'higher';
  peer?: number | null;
  peerName?: string | null;
  bar?: number | null;
  barOnRatio?: boolean;
}): Row {
  const peer = given.peer ?? null;
  const bar = given.bar ?? null;
  const ratio = peer === null ? null : given.ours / peer;
  const judged = given.barOnRatio === true ? ratio : given.ours;
  const holds = bar === null || judged === null ? null : given.better === 'lower' ? judged <= bar : judged >= bar;
  return {
    suite: given.suite,
    case: given.case,
    unit: given.unit,
    ours: given.ours,
    peer,
    peerName: given.peerName ?? null,
    ratio,
    better: given.better,
    bar,
    holds,
  };
}

/** Seconds of `repeats` runs of `work`, after one that is not counted; `leastCpu` holds up on a busy machine. */
export async function timed(
  repeats: number,
  work: () => unknown,
): Promise<{ least: number; mean: number; deviation: number; leastCpu: number }> {
  await work();
  const seconds: number[] = [];
  let leastCpu = Number.POSITIVE_INFINITY;
  for (let i = 0; i < repeats; i++) {
    const start = performance.now();
    const cpu = process.cpuUsage();
    await work();
    const { user, system } = process.cpuUsage(cpu);
    leastCpu = Math.min(leastCpu, (user + system) / 1e6);
    seconds.push((performance.now() - start) / 1000);
  }
  const mean = seconds.reduce((sum, s) => sum + s, 0) / repeats;
  const variance = seconds.reduce((sum, s) => sum + (s - mean) ** 2, 0) / Math.max(1, repeats - 1);
  return { least: Math.min(...seconds), mean, deviation: Math.sqrt(variance), leastCpu };
}

const COLUMNS = [
  ['case', 60],
  ['unit', 12],
  ['ours', 11],
  ['peer', 11],
  ['ratio', 7],
  ['bar', 11],
  ['holds', 6],
  ['peer name', 0],
] as const;

/** Heading of the table for people. */
export function tableHead(): string {
  return COLUMNS.map(([name, width]) => name.padEnd(width)).join(' ');
}

/** One row of the table for people. */
export function tableRow(line: Row): string {
  const holds = line.holds === null ? '' : line.holds ? 'yes' : 'NO';
  const cells = [line.case, line.unit, number(line.ours), number(line.peer), number(line.ratio), bar(line), holds];
  return [...cells, line.peerName ?? ''].map((cell, i) => cell.padEnd(COLUMNS[i]![1])).join(' ');
}

function bar(line: Row): string {
  return line.bar === null ? '' : `${line.better === 'lower' ? '<=' : '>='} ${number(line.bar)}`;
}

function number(value: number | null): string {
  if (value === null) return '';
  return Number.isInteger(value) ? String(value) : value.toPrecision(4);
}
