/** Where the time of a run went, from the sampling profiler of the engine (`node --cpu-prof`): own time by source file and by function. */
import { readdirSync, readFileSync } from 'node:fs';
import { join } from 'node:path';

/** What a .cpuprofile file holds: the DevTools protocol's Profiler.Profile. */
interface CpuProfile {
  readonly nodes: readonly {
    readonly id: number;
    readonly callFrame: { readonly functionName: string; readonly url: string; readonly lineNumber: number };
  }[];
  readonly samples: readonly number[];
  /** Microseconds before each sample. */
  readonly timeDeltas: readonly number[];
}

const MOST_LINES = 12;

/** Lines for people: one profile file a thread. */
export function profileSummary(folder: string): string[] {
  const files = readdirSync(folder).filter((file) => file.endsWith('.cpuprofile'));
  return files.flatMap((file) => {
    const profile = JSON.parse(readFileSync(join(folder, file), 'utf8')) as CpuProfile;
    const [byFile, byFunction] = [new Map<string, number>(), new Map<string, number>()];
    const total = addUp(profile, byFile, byFunction);
    return [
      `profile ${join(folder, file)}: ${(total / 1e3).toFixed(0)} ms`,
      ...largest(byFile, total).map((line) => `  ${line}`),
      ...largest(byFunction, total).map((line) => `    ${line}`),
    ];
  });
}

/** Own microseconds by file and by function; returns their sum. */
function addUp(profile: CpuProfile, byFile: Map<string, number>, byFunction: Map<string, number>): number {
  const places = new Map(profile.nodes.map(({ id, callFrame }) => [id, callFrame]));
  let total = 0;
  profile.samples.forEach((id, k) => {
    const { functionName, url, lineNumber } = places.get(id)!;
    const spent = profile.timeDeltas[k]!;
    const file = url === '' ? functionName || '(engine)' : url.replace(/^.*\/(dist|node_modules)\//, '');
    const name = url === '' ? file : `${functionName || '(top level)'} ${file}:${lineNumber + 1}`;
    byFile.set(file, (byFile.get(file) ?? 0) + spent);
    byFunction.set(name, (byFunction.get(name) ?? 0) + spent);
    total += spent;
  });
  return total;
}

function largest(spent: ReadonlyMap<string, number>, total: number): string[] {
  return [...spent]
    .sort((a, b) => b[1] - a[1])
    .slice(0, MOST_LINES)
    .map(
      ([name, us]) =>
        `${(us / 1e3).toFixed(0).padStart(7)} ms ${((100 * us) / total).toFixed(1).padStart(5)} %  ${name}`,
    );
}
