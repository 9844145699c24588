/** `stillwell desk`: collects segments from the broker, answers with receipts, keeps the archive. */
import { Command } from 'commander';
import type { RunEvent } from '../desk/run.ts';
import { rootOption } from '../topic-option.ts';

interface DeskCommandOptions {
  readonly data: string;
  readonly broker: string;
  readonly bundles?: string;
  readonly root: string;
  readonly json: boolean;
}

/** The command, to be joined to the program. */
export function deskCommand(): Command {
  const status = new Command('status')
    .description('What a desk holds, site by site; the desk may be running meanwhile.')
    .requiredOption('--data <dir>', 'data folder of the desk')
    .option('--json', 'as JSON', false)
    .addHelpText('after', '\nExample:\n  stillwell desk status --data desk-data')
    .action(showStatus);
  return new Command('desk')
    .description('Collects segments, answers with receipts, and keeps the exact readings. Runs until Ctrl-C.')
    .option('--data <dir>', 'data folder; one desk at a time')
    .option('--broker <url>', 'mqtt://[user:password@]host[:port] or mqtts://…')
    .option('--bundles <dir>', 'folder of sealed bundles (.swb) to decode with; looked through again every two seconds')
    .option('--root <topic>', 'first level of the topics', rootOption, 'stillwell')
    .option('--json', 'one JSON line per event on standard output', false)
    .addHelpText(
      'after',
      '\nExamples:\n  stillwell desk --data desk-data --broker mqtt://localhost:1883 --bundles bundles\n' +
        '  stillwell desk status --data desk-data',
    )
    .addCommand(status)
    .action(runDesk);
}

async function runDesk(options: DeskCommandOptions, command: Command): Promise<void> {
  for (const name of ['data', 'broker'] as const) {
    if (options[name] === undefined) command.error(`error: required option '--${name}' not specified`);
  }
  const [{ startDesk }, { DeskCounts, eventLine }] = await Promise.all([
    import('../desk/run.ts'),
    import('../desk/event-text.ts'),
  ]);
  const counts = new DeskCounts();
  const draw = statusLine(() => counts.line());
  const onEvent = (event: RunEvent): void => {
    counts.count(event, Date.now());
    if (options.json) {
      process.stdout.write(`${JSON.stringify({ at: new Date().toISOString(), ...event }, hexBytes)}\n`);
      return;
    }
    const line = eventLine(event);
    if (line !== null) draw.say(line);
    else draw.refresh();
  };
  const stopped = untilSignal();
  const bundles = options.bundles ?? null;
  const desk = await startDesk({ data: options.data, broker: options.broker, root: options.root, bundles, onEvent });
  if (!options.json) draw.say(`desk: collecting ${options.root}/+/segments into ${options.data}`);
  await stopped;
  if (!options.json) draw.end();
  await desk.stop();
}

async function showStatus(options: { readonly data: string; readonly json: boolean }): Promise<void> {
  const [{ openArchive }, { readStatus }, { statusText }] = await Promise.all([
    import('../desk/store/open.ts'),
    import('../desk/status.ts'),
    import('../desk/status-text.ts'),
  ]);
  const store = await openArchive(options.data);
  try {
    const statuses = await readStatus(store);
    process.stdout.write(`${options.json ? JSON.stringify(statuses) : statusText(statuses)}\n`);
  } finally {
    await store.close();
  }
}

/** Resolves at Ctrl-C or a request to end. */
function untilSignal(): Promise<void> {
  return new Promise((resolve) => {
    for (const signal of ['SIGINT', 'SIGTERM'] as const) process.once(signal, () => resolve());
  });
}

/** A line redrawn in place on a terminal; elsewhere only what is said. */
function statusLine(text: () => string) {
  const out = process.stdout;
  let drawnMs = 0;
  const clear = (): void => void (out.isTTY && out.write('\r\x1b[K'));
  const draw = (): void => void (out.isTTY && out.write(`\r\x1b[K${text().slice(0, (out.columns || 80) - 1)}`));
  return {
    say(line: string): void {
      clear();
      out.write(`${line}\n`);
      draw();
    },
    refresh(): void {
      if (Date.now() - drawnMs < 200) return;
      drawnMs = Date.now();
      draw();
    },
    end(): void {
      clear();
      out.write(`${text()}\n`);
    },
  };
}

/** Bytes in an event as hex. */
function hexBytes(_key: string, value: unknown): unknown {
  return value instanceof Uint8Array ? Buffer.from(value).toString('hex') : value;
}
