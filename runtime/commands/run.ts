/** `stillwell-gateway run`: the gateway itself, until it is told to stop. */
import { Command } from 'commander';
import { checkNamed, siteOfBundle } from '../bundle/load.ts';
import { holdsBundle } from '../bundle/slots.ts';
import { systemClock } from '../clock.ts';
import { type RawSitesOptions, readConfigs, readGiven } from '../config.ts';
import { openDataFolder } from '../data-folder.ts';
import { nodeDisk } from '../disk.ts';
import { RuntimeError } from '../errors.ts';
import type { Gateway } from '../gateway.ts';
import { createLog } from '../log.ts';
import { keepHeapSmall } from '../memory.ts';
import { shownBroker } from '../mqtt/connection.ts';
import { DEFAULT_PORT, parsePageAddress } from '../page/address.ts';
import { openServiceNotice } from '../service-notice.ts';
import { type FirstBundle, Several, type SiteJob } from '../several.ts';
import { tellOfHang, watchThisLoop } from '../watchdog.ts';
import { brokerOptions, gather, sitesOptions } from './options.ts';

interface RunOptions extends RawSitesOptions {
  readonly bundle: readonly string[];
  readonly page?: string;
  readonly log: string;
}

/** Builds the command. */
export function runCommand(): Command {
  const command = new Command('run').description(
    'Subscribes to a site or several, filters, forecasts and keeps the record; takes bundles from the broker or from a file.',
  );
  return brokerOptions(sitesOptions(command))
    .requiredOption(
      '--data <folder>',
      'data folder of this gateway, made if absent; of several sites each has one of its name in it',
    )
    .option(
      '--bundle <file>',
      'sealed bundle to put to work first, if it is newer than what serves; may be repeated',
      gather,
      [],
    )
    .option('--gateway <name>', 'name of this gateway (default: the host name)')
    .option('--clock <kind>', 'wall: ticks close by the clock; readings: by the readings alone, for replays', 'wall')
    .option('--segment-ticks <n>', 'ticks in a segment (default: an hour of them, 60 to 3600)')
    .option('--spool-mib <n>', 'most MiB of segments waiting on disk (default 32)')
    .option('--health-seconds <n>', 'seconds between health messages (default 60)')
    .option(
      '--page <where>',
      `port or host:port of the gateway's own page, or off (default: 127.0.0.1:${DEFAULT_PORT})`,
    )
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
  const address = parsePageAddress(options.page);
  const jobs = jobsOf(options);
  // What it takes to serve pages is loaded where they are wanted, and before any gateway starts, so that they miss nothing.
  const pages =
    address === null ? null : new (await import('../page/pages.ts')).Pages(address, { clock: systemClock, log });
  for (const { config } of jobs) {
    const warning = openDataFolder(nodeDisk, config.data);
    if (warning !== null) log.error(warning);
  }
  tellOfHang(nodeDisk, options.data, log);
  const notice = openServiceNotice(process.env, log);
  let unwatch = async (): Promise<void> => {};
  let several: Several | null = null;
  try {
    several = new Several(jobs, {
      ports: { clock: systemClock, disk: nodeDisk, log },
      onGateway: (gateway) => {
        log.info(startedText(gateway));
        pages?.take(gateway);
      },
      offer: offerFirst,
    });
    for (const { engine } of several.gateways) {
      const name = jobs.length === 1 ? '' : `${engine.site.site}: `;
      if (engine.serving === null)
        log.info(`${name}no bundle yet: recording, and waiting for one from the broker or from \`load\``);
    }
    unwatch = watchThisLoop(options.data, log);
    notice.ready();
    await untilToldToStop();
    log.info('stopping');
    notice.stopping();
    await Promise.all([several.stop(), pages?.close()]);
    log.info('stopped');
  } catch (error) {
    await Promise.all([several?.abandon(), pages?.close()]);
    throw error;
  } finally {
    await unwatch();
  }
}

/** Everything that a start needs, checked before anything is made or changed. */
function jobsOf(options: RunOptions): readonly SiteJob[] {
  const configs = readConfigs(nodeDisk, options);
  const bundles = configs.map((): FirstBundle[] => []);
  for (const path of options.bundle) {
    const sealed = readGiven(nodeDisk, path, 'bundle');
    const at = siteOfBundle(path, sealed, configs);
    bundles[at]!.push({ path, sealed });
    const { data, site, trusted } = configs[at]!;
    // Where nothing else can serve, a bundle that will not do ends the start before there is anything to clear away.
    if (!holdsBundle(nodeDisk, data)) checkNamed(path, sealed, site, trusted);
  }
  return configs.map((config, i) => ({ config, bundles: bundles[i]! }));
}

function startedText({ config: { gateway, site, broker } }: Gateway): string {
  return `gateway ${gateway} of site ${site.site}: ${site.signals.length} signals, broker ${shownBroker(broker.url)}`;
}

/** A bundle named on the command line must be good where nothing else serves; an old one beside a serving one is only said. */
function offerFirst(gateway: Gateway, { sealed, path }: FirstBundle): void {
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
