/** `stillwell-gateway run`: the gateway itself, until it is told to stop. */
import { Command } from 'commander';
import { checkNamed } from '../bundle/load.ts';
import { holdsBundle } from '../bundle/slots.ts';
import { systemClock } from '../clock.ts';
import { makeDataFolder, type RawOptions, readConfig, readGiven } from '../config.ts';
import { nodeDisk } from '../disk.ts';
import { RuntimeError } from '../errors.ts';
import { Gateway } from '../gateway.ts';
import { takeLock } from '../lock.ts';
import { createLog } from '../log.ts';
import { keepHeapSmall } from '../memory.ts';
import { shownBroker } from '../mqtt/connection.ts';
import { brokerOptions, siteOptions } from './options.ts';

interface RunOptions extends RawOptions {
  readonly bundle?: string;
  readonly log: string;
}

/** Builds the command. */
export function runCommand(): Command {
  const command = new Command('run').description(
    'Subscribes to the site, filters, forecasts and keeps the record; takes bundles from the broker or from a file.',
  );
  return brokerOptions(siteOptions(command))
    .requiredOption('--data <folder>', 'data folder of this gateway, made if absent')
    .option('--bundle <file>', 'sealed bundle to put to work first, if it is newer than what serves')
    .option('--gateway <name>', 'name of this gateway (default: the host name)')
    .option('--clock <kind>', 'wall: ticks close by the clock; readings: by the readings alone, for replays', 'wall')
    .option('--segment-ticks <n>', 'ticks in a segment (default: an hour of them, 60 to 3600)')
    .option('--spool-mib <n>', 'most MiB of segments waiting on disk (default 32)')
    .option('--health-seconds <n>', 'seconds between health messages (default 60)')
    .option('--log <level>', 'debug, info, warn, error or silent', 'info')
    .addHelpText(
      'after',
      '\nExample:\n  stillwell-gateway run --site site.yaml --data /var/lib/stillwell --trust author.pub \\\n' +
        '    --broker mqtt://localhost:1883 --bundle first.swb',
    )
    .action(async (options: RunOptions) => {
      keepHeapSmall();
      await run(options);
    });
}

async function run(options: RunOptions): Promise<void> {
  const log = createLog(options.log);
  const config = readConfig(nodeDisk, options);
  const first = options.bundle === undefined ? null : readGiven(nodeDisk, options.bundle, 'bundle');
  // Where nothing else can serve, a bundle that will not do ends the start before there is anything to clear away.
  if (first !== null && !holdsBundle(nodeDisk, config.data))
    checkNamed(options.bundle!, first, config.site, config.trusted);
  makeDataFolder(nodeDisk, config.data);
  const unlock = takeLock(config.data);
  let gateway: Gateway | null = null;
  try {
    gateway = new Gateway(config, { clock: systemClock, disk: nodeDisk, log });
    log.info(
      `gateway ${config.gateway} of site ${config.site.site}: ${config.site.signals.length} signals, broker ${shownBroker(config.broker.url)}`,
    );
    if (first !== null) offerFirst(gateway, first, options.bundle!);
    if (gateway.engine.serving === null) log.info('no bundle yet: waiting for one from the broker or from `load`');
    await untilToldToStop();
    log.info('stopping');
    await gateway.stop();
    log.info('stopped');
  } catch (error) {
    await gateway?.abandon();
    throw error;
  } finally {
    unlock();
  }
}

/** A bundle named on the command line must be good where nothing else serves; an old one beside a serving one is only said. */
function offerFirst(gateway: Gateway, sealed: Uint8Array, path: string): void {
  const outcome = gateway.offerBundle(sealed, path);
  if (gateway.engine.serving === null) throw new RuntimeError('bundle', outcome);
}

/** Also ends, by an error, when something fails where nobody waits for it: one line and a restart instead of a stack. */
function untilToldToStop(): Promise<void> {
  return new Promise((resolve, reject) => {
    for (const signal of ['SIGINT', 'SIGTERM'] as const) process.once(signal, () => resolve());
    process.once('uncaughtException', reject);
  });
}
