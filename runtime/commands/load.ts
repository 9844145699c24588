/** `stillwell-gateway load`: a bundle from a file into a data folder, whether its gateway runs or not. */
import { toHex } from '@stillwell/protocol';
import { Command } from 'commander';
import { BundleKeeper } from '../bundle/change.ts';
import { incomingPath } from '../bundle/intake.ts';
import { checkNamed, siteOfBundle } from '../bundle/load.ts';
import { checkSites, makeDataFolder, readGiven, readSite, readTrust } from '../config.ts';
import { dataFolderOf } from '../data-folders.ts';
import { nodeDisk, replaceOn } from '../disk.ts';
import { RuntimeError } from '../errors.ts';
import { lockHolder, takeLock } from '../lock.ts';
import { sitesOptions } from './options.ts';

interface LoadOptions {
  readonly site: readonly string[];
  readonly trust: readonly string[];
  readonly data: string;
}

/** How long a running gateway gets to take the bundle. */
const PATIENCE_MS = 10_000;

/** Builds the command. */
export function loadCommand(): Command {
  const command = new Command('load').description(
    'Checks a sealed bundle and hands it to the gateway of a data folder; a running gateway changes to it at the next tick.',
  );
  return sitesOptions(command)
    .argument('<bundle>', 'sealed bundle file')
    .requiredOption('--data <folder>', 'data folder of the gateway, as given to run')
    .addHelpText(
      'after',
      '\nExample:\n  stillwell-gateway load new.swb --site site.yaml --data /var/lib/stillwell --trust author.pub',
    )
    .action(load);
}

async function load(file: string, options: LoadOptions): Promise<void> {
  const sites = options.site.map((path) => readSite(nodeDisk, path));
  checkSites(sites, options.site);
  const trusted = readTrust(nodeDisk, options.trust);
  const sealed = readGiven(nodeDisk, file, 'bundle');
  const places = sites.map((site) => ({ site, trusted }));
  const { site } = places[siteOfBundle(file, sealed, places)]!;
  checkNamed(file, sealed, site, trusted);
  const data = dataFolderOf(nodeDisk, options.data, site.site, sites.length);
  makeDataFolder(nodeDisk, data);
  const holder = lockHolder(data);
  const unlock = holder === null ? takeLock(data) : null;
  try {
    const keeper = new BundleKeeper(nodeDisk, data, site, trusted);
    const verdict = keeper.judge(sealed);
    if (verdict.outcome === 'refused')
      throw new RuntimeError('bundle', `${file}: refused (${verdict.code}): ${verdict.reason}`);
    if (verdict.outcome === 'known') {
      process.stdout.write(`${file}: known already; nothing to do\n`);
      return;
    }
    const { digest, sequence } = verdict.checked;
    const name = `${toHex(digest).slice(0, 16)}…, sequence ${sequence}`;
    if (holder === null) {
      const offered = keeper.offer(sealed, keeper.best());
      if (offered.outcome === 'refused') throw new RuntimeError('bundle', `${file}: ${offered.reason}`);
      process.stdout.write(`${file}: stored (${name}); the gateway changes to it when it starts\n`);
      return;
    }
    replaceOn(nodeDisk, incomingPath(data), sealed);
    if (!(await isTaken(data)))
      throw new RuntimeError('data-folder', `${file}: handed over, but process ${holder} has not taken it within 10 s`);
    process.stdout.write(`${file}: taken by the running gateway (${name}); see its status\n`);
  } finally {
    unlock?.();
  }
}

async function isTaken(folder: string): Promise<boolean> {
  for (let waited = 0; waited < PATIENCE_MS; waited += 100) {
    if (nodeDisk.size(incomingPath(folder)) === 0) return true;
    await new Promise((resolve) => setTimeout(resolve, 100));
  }
  return false;
}
