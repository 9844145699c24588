/** `stillwell watch`: a site's forecasts in the terminal, live. */
import { ADVISORY } from '@stillwell/protocol';
import { Command, Option } from 'commander';
import type { WatchedSite } from '../desk/watch-view.ts';
import { seconds, several } from '../option-values.ts';
import { rootOption, siteNameOption } from '../topic-option.ts';

interface WatchCommandOptions {
  readonly broker: string;
  readonly site: string;
  readonly root: string;
  readonly signal?: readonly string[];
  readonly once: boolean;
  readonly wait: number;
  readonly json: boolean;
  readonly clock: 'wall' | 'readings';
}

/** The command, to be joined to the program. */
export function watchCommand(): Command {
  return new Command('watch')
    .description("Shows a site's forecasts with bounds, plots, age and time to limits. Runs until Ctrl-C.")
    .requiredOption('--broker <url>', 'mqtt://[user:password@]host[:port] or mqtts://…')
    .requiredOption('--site <name>', 'site to watch', siteNameOption)
    .option('--root <topic>', 'first level of the topics', rootOption, 'stillwell')
    .option('--signal <name>', 'only this signal; may be repeated', several)
    .option('--once', 'show what there is and end; exit code 1 when nothing came in time', false)
    .option('--wait <seconds>', 'with --once: how long to wait', seconds, 10)
    .option('--json', 'one JSON line per forecast', false)
    .addOption(
      new Option('--clock <kind>', 'what ages are counted from: the wall clock, or for replays the newest tick heard')
        .choices(['wall', 'readings'])
        .default('wall'),
    )
    .addHelpText('after', '\nExample:\n  stillwell watch --broker mqtt://localhost:1883 --site pump-7 --signal level')
    .action(watch);
}

async function watch(options: WatchCommandOptions): Promise<void> {
  const [{ followSite }, view] = await Promise.all([import('../desk/watch.ts'), import('../desk/watch-view.ts')]);
  const isLive = process.stdout.isTTY && !options.once && !options.json;
  const isWanted = (signal: string): boolean => options.signal === undefined || options.signal.includes(signal);
  const wanted = (site: WatchedSite): string[] => [...site.forecasts.keys()].filter(isWanted).sort();
  let site: WatchedSite = { site: options.site, forecasts: new Map(), state: null, health: null };
  let changedMs = 0;
  const nowMs = (): number => (options.clock === 'wall' ? Date.now() : view.newestTickEndMs(site));
  const draw = (): void => {
    // A terminal that does not know its size says 0.
    const rows = process.stdout.rows || 24;
    const columns = process.stdout.columns || 80;
    // Home, then each line cleared to its end: redrawing in place does not flicker.
    const screen = view.screenText(site, wanted(site), nowMs(), rows, columns).replaceAll('\n', '\x1b[K\n');
    process.stdout.write(`\x1b[H${screen}\x1b[K\x1b[J`);
  };
  const line = (signal: string): void => {
    const one = view.viewOf(site.forecasts.get(signal)!, site.state, nowMs());
    process.stdout.write(`${options.json ? JSON.stringify({ site: site.site, ...one }) : view.viewLine(one)}\n`);
  };
  if (!options.json && !isLive) process.stdout.write(`${ADVISORY}\n`);
  if (isLive) process.stdout.write('\x1b[2J');
  const following = await followSite({
    ...options,
    onChange: (next, signal) => {
      site = next;
      changedMs = Date.now();
      if (!isLive && !options.once && signal !== null && isWanted(signal)) line(signal);
    },
    onTrouble: (text) => void (isLive || process.stderr.write(`stillwell: ${text}\n`)),
  });
  // Redrawn by the clock as well, so that ages grow and stale forecasts show as stale though nothing arrives.
  const timer = isLive ? setInterval(draw, 500) : null;
  if (options.once) await untilQuiet(() => (wanted(site).length > 0 ? changedMs : null), options.wait * 1000);
  else await untilSignal();
  if (timer !== null) clearInterval(timer);
  await following.stop();
  if (isLive) process.stdout.write('\n');
  if (!options.once) return;
  for (const signal of wanted(site)) line(signal);
  if (wanted(site).length === 0) {
    process.stderr.write(
      `stillwell: no forecast of ${options.site} within ${options.wait} s; check site name, root and signal, and that ` +
        'its gateway runs\n',
    );
    process.exitCode = 1;
  }
}

/** What is retained comes at once: half a second without news after the first is all of it. */
async function untilQuiet(lastChange: () => number | null, waitMs: number): Promise<void> {
  const until = Date.now() + waitMs;
  while (Date.now() < until) {
    const last = lastChange();
    if (last !== null && Date.now() - last > 500) return;
    await new Promise((resolve) => setTimeout(resolve, 50));
  }
}

function untilSignal(): Promise<void> {
  return new Promise((resolve) => {
    for (const signal of ['SIGINT', 'SIGTERM'] as const) process.once(signal, () => resolve());
  });
}
