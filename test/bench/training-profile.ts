/** Where the time of a run went, from the sampling profiler of the engine (`node --cpu-prof`): own time by folder, by file and by function. */
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

const MOST_LINES = 20;

/** Lines for people: one profile file a thread. */
export function profileSummary(folder: string): string[] {
  const files = readdirSync(folder).filter((file) => file.endsWith('.cpuprofile'));
  return files.flatMap((file) => {
    const profile = JSON.parse(readFileSync(join(folder, file), 'utf8')) as CpuProfile;
    const spent = addUp(profile);
    return [
      `profile ${join(folder, file)}: ${(spent.total / 1e3).toFixed(0)} ms`,
      ...largest(spent.byFolder, spent.total).map((line) => `  ${line}`),
      ...largest(spent.byFile, spent.total).map((line) => `    ${line}`),
      ...largest(spent.byFunction, spent.total).map((line) => `      ${line}`),
    ];
  });
}

interface Spent {
  total: number;
  readonly byFolder: Map<string, number>;
  readonly byFile: Map<string, number>;
  readonly byFunction: Map<string, number>;
}

/** Own microseconds. */
function addUp(profile: CpuProfile): Spent {
  const places = new Map(profile.nodes.map(({ id, callFrame }) => [id, callFrame]));
  const spent: Spent = { total: 0, byFolder: new Map(), byFile: new Map(), byFunction: new Map() };
  const add = (to: Map<string, number>, name: string, us: number): void => void to.set(name, (to.get(name) ?? 0) + us);
  profile.samples.forEach((id, k) => {
    const { functionName, url, lineNumber } = places.get(id)!;
    const us = profile.timeDeltas[k]!;
    const file = url === '' ? functionName || '(engine)' : url.replace(/^.*\/(dist|node_modules)\//, '');
    add(spent.byFolder, file.startsWith('node:') ? 'node:' : file.split('/')[0]!, us);
    add(spent.byFile, file, us);
    add(spent.byFunction, url === '' ? file : `${functionName || '(top level)'} ${file}:${lineNumber + 1}`, us);
    spent.total += us;
  });
  return spent;
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
