/** `stillwell fit --fleet`: many sites at once, each to a folder of its own. */
import { availableParallelism } from 'node:os';
import { join } from 'node:path';
import { ADVISORY, type FleetEntryOptions, ProtocolError, type Site } from '@stillwell/protocol';
import { TrainError } from '../errors.ts';
import type { FitSiteJob } from '../fit-site.ts';
import { FLEET_JSON, fleetJson } from '../fleet/fleet-json.ts';
import { createFleetProgress } from '../fleet/fleet-progress.ts';
import { fleetText } from '../fleet/fleet-text.ts';
import { type FleetSite, listSites } from '../fleet/list-sites.ts';
import { type FleetResult, type FleetWork, runFleet } from '../fleet/run-fleet.ts';
import { chooseThreads } from '../fleet/threads.ts';
import { INTERRUPTED_CODE } from '../history/interrupt.ts';
import { writeOutputs } from '../output-file.ts';
import { fleetPeaks, storedBytes } from '../sizing/fleet-peaks.ts';

/** Exit code where some sites failed and the others were fitted. */
const SOME_FAILED = 3;

/** Work of a fit whose history is next to nothing, in bytes read. */
const LEAST_WEIGHT = 500_000;

/** Below this a worker could not even load the program. */
const LEAST_HEAP_MB = 256;

/** What the command line asks of a fleet. */
export interface FleetOptions {
  readonly fleet: string;
  readonly out: string;
  readonly threads: number | null;
  readonly fresh: boolean;
  readonly json: boolean;
  /** The job of a site, with what its entry in the fleet file wants otherwise. */
  readonly jobOf: (site: Site, history: readonly string[], out: string, entry: FleetEntryOptions) => FitSiteJob;
}

/** Runs the command; sets the exit code where not all went well. */
export async function fitFleet(options: FleetOptions): Promise<void> {
  const { sites, passedOver } = listSites(options.fleet, options.out);
  const works = sites.map((site, index) => workOf(site, index, options));
  const machine = { cores: availableParallelism(), freeBytes: process.availableMemory() };
  const jobs = works.flatMap(({ task }) => (task === null ? [] : [task.job]));
  const peaks = await fleetPeaks(jobs, options.threads ?? machine.cores);
  const threads = chooseThreads(peaks, machine, options.threads);
  for (const folder of passedOver)
    process.stderr.write(`stillwell: ${folder} holds no site.yaml and no history; passed over\n`);
  const interrupt = listenForInterrupt();
  const progress = createFleetProgress(works.map(({ weight }) => weight));
  const { results, isStopped } = await runFleet(works, {
    threads: threads.count,
    heapMb: Math.max(LEAST_HEAP_MB, Math.round(machine.freeBytes / 1e6 / threads.count)),
    progress,
    signal: interrupt.signal,
  }).finally(() => {
    progress.end();
    interrupt.forget();
  });
  if (isStopped) return sayStopped(results);
  const whole = results as readonly FleetResult[];
  await writeSummary(options, whole);
  if (whole.some(({ facts }) => facts === null)) process.exitCode = SOME_FAILED;
}

function workOf(site: FleetSite, index: number, options: FleetOptions): FleetWork {
  const refused = (problem: string): FleetWork => ({ label: site.label, task: null, problem, weight: 0 });
  if (site.site === null || site.problem !== null) return refused(site.problem ?? 'no site file');
  try {
    const job = options.jobOf(site.site, site.history, join(options.out, site.label), site.options);
    return {
      label: site.label,
      task: { index, job, isFresh: options.fresh },
      problem: null,
      weight: LEAST_WEIGHT + storedBytes(site.history),
    };
  } catch (error) {
    if (error instanceof TrainError || error instanceof ProtocolError) return refused(error.message);
    throw error;
  }
}

async function writeSummary(options: FleetOptions, results: readonly FleetResult[]): Promise<void> {
  // Plots take half a second to load.
  const { FLEET_PAGE, fleetPage } = await import('../fleet/fleet-page.ts');
  const json = `${JSON.stringify(fleetJson(results), null, 2)}\n`;
  writeOutputs([
    { path: join(options.out, FLEET_PAGE), bytes: fleetPage(results) },
    { path: join(options.out, FLEET_JSON), bytes: json },
  ]);
  process.stdout.write(
    options.json
      ? json
      : `${fleetText(results)}\n\nWritten to ${options.out}: a folder a site, ${FLEET_PAGE}, ${FLEET_JSON}\n\n${ADVISORY}\n`,
  );
}

function sayStopped(results: readonly (FleetResult | null)[]): void {
  const done = results.filter((one) => one !== null && one.facts !== null).length;
  process.stderr.write(
    `stillwell: stopped; ${done} of ${results.length} sites are done and stay; the same command goes on with the rest\n`,
  );
  process.exitCode = INTERRUPTED_CODE;
}

function listenForInterrupt(): { readonly signal: AbortSignal; forget(): void } {
  const controller = new AbortController();
  const abort = (): void => controller.abort();
  for (const name of ['SIGINT', 'SIGTERM'] as const) process.once(name, abort);
  return {
    signal: controller.signal,
    forget: () => {
      for (const name of ['SIGINT', 'SIGTERM'] as const) process.off(name, abort);
    },
  };
}
