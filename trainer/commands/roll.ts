/** `stillwell roll`: hands a sealed bundle to its site by the broker and waits for the gateway's word. */
import type { HealthMessage } from '@stillwell/protocol';
import { Command } from 'commander';
import { hex, openBundleFile } from '../bundle-file.ts';
import type { RollOutcome } from '../desk/roll.ts';
import { TrainError } from '../errors.ts';
import { readBytesFile } from '../key-file.ts';
import { seconds } from '../option-values.ts';
import { printable } from '../text-table.ts';
import { rootOption } from '../topic-option.ts';

interface RollCommandOptions {
  readonly bundle: string;
  readonly broker: string;
  readonly root: string;
  readonly wait: number;
  readonly json: boolean;
}

/** The command, to be joined to the program. */
export function rollCommand(): Command {
  return new Command('roll')
    .description('Publishes a sealed bundle to its site, retained, and waits until the gateway serves it or refuses.')
    .requiredOption('--bundle <file>', 'sealed bundle (.swb)')
    .requiredOption('--broker <url>', 'mqtt://[user:password@]host[:port] or mqtts://…')
    .option('--root <topic>', 'first level of the topics', rootOption, 'stillwell')
    .option('--wait <seconds>', 'how long to wait for the gateway', seconds, 120)
    .option('--json', 'the outcome as JSON', false)
    .addHelpText(
      'after',
      '\nExit code 0 when it serves, 1 when the gateway refused or did not speak in time.\n' +
        '\nExample:\n  stillwell roll --bundle pump-7.swb --broker mqtt://localhost:1883 --wait 60',
    )
    .action(roll);
}

async function roll(options: RollCommandOptions): Promise<void> {
  const { envelope, bundle, digest } = openBundleFile(options.bundle);
  if (envelope === null) {
    throw new TrainError(
      'bundle',
      `${options.bundle} is a candidate, not sealed; seal it first with \`stillwell seal\``,
    );
  }
  const { rollBundle } = await import('../desk/roll.ts');
  const outcome = await rollBundle({
    broker: options.broker,
    root: options.root,
    site: bundle.site,
    sealed: readBytesFile(options.bundle, 'a sealed bundle (.swb)'),
    digest: hex(digest),
    sequence: envelope.sequence,
    waitMs: options.wait * 1000,
  });
  const sentence = outcomeText(outcome, bundle.site, options.wait);
  if (options.json) {
    const { health: _, ...facts } = outcome;
    process.stdout.write(
      `${JSON.stringify({ site: bundle.site, digest: hex(digest), sequence: envelope.sequence, ...facts, message: sentence })}\n`,
    );
  } else if (outcome.outcome === 'serving') process.stdout.write(`${sentence}\n`);
  else process.stderr.write(`stillwell: ${sentence}\n`);
  if (outcome.outcome !== 'serving') process.exitCode = 1;
}

function outcomeText(outcome: RollOutcome, site: string, waitSeconds: number): string {
  const gateway = outcome.gateway ?? 'no gateway';
  switch (outcome.outcome) {
    case 'serving':
      return `${site}: ${gateway} serves the bundle, ${(outcome.tookMs / 1000).toFixed(1)} s after it was published`;
    case 'refused':
      return `${site}: ${gateway} refused the bundle: ${printable(outcome.reason ?? 'no reason given')}`;
    case 'silent':
      return outcome.health === null
        ? `${site}: no gateway spoke within ${waitSeconds} s; the bundle stays on its topic (retained). Check that the ` +
            'gateway runs, that both use the same broker, root and site name'
        : `${site}: ${gateway} (${outcome.health.status}) said nothing about the bundle within ${waitSeconds} s and serves ` +
            `${outcome.health.bundle?.slice(0, 16) ?? 'none'}${lastRefusal(outcome.health)}; the bundle stays on its topic (retained)`;
  }
}

/** A gateway speaks once about a bundle it refuses; rolled out again, the word is an old one. */
function lastRefusal(health: HealthMessage): string {
  const change = health.last_change;
  return change?.outcome === 'refused'
    ? `; it last refused one at ${change.at}: ${printable(change.reason ?? 'no reason given')}`
    : '';
}
