/** `stillwell-gateway status`: what a gateway said of itself last, without a broker. */
import type { HealthMessage } from '@stillwell/protocol';
import { Command } from 'commander';
import { usedFolders } from '../data-folders.ts';
import { nodeDisk } from '../disk.ts';
import { lockHolder } from '../lock.ts';
import { readStatus } from '../status.ts';

/** Builds the command. */
export function statusCommand(): Command {
  return new Command('status')
    .description('Prints what the gateways of a data folder said of themselves last, and whether they run now.')
    .requiredOption('--data <folder>', 'data folder of the gateway, or of several')
    .option('--json', 'one JSON object, of several sites one a line')
    .addHelpText('after', '\nExample:\n  stillwell-gateway status --data /var/lib/stillwell')
    .action((options: { data: string; json?: boolean }) => {
      const folders = usedFolders(nodeDisk, options.data);
      const texts = (folders.length === 0 ? [options.data] : folders).map((folder) => {
        const health = readStatus(nodeDisk, folder);
        const pid = lockHolder(folder);
        return options.json ? `${JSON.stringify({ running: pid !== null, pid, health })}\n` : statusText(health, pid);
      });
      process.stdout.write(texts.join(options.json ? '' : '\n'));
    });
}

function statusText(health: HealthMessage, pid: number | null): string {
  const { counters } = health;
  const count = (name: string): string => String(counters[name] ?? 0);
  const refused = Object.entries((counters.refused ?? {}) as Record<string, number>);
  const change = health.last_change;
  const lines: [string, string][] = [
    ['gateway', `${health.gateway}, site ${health.site}`],
    ['process', pid === null ? 'not running' : `running, ${pid}`],
    ['said', `${health.status} at ${health.issued_at}`],
    ['quality', health.quality === undefined ? 'good' : `${health.quality}: ${health.quality_reason ?? ''}`],
    ['bundle', health.bundle === null ? 'none' : `${health.bundle.slice(0, 16)}…, sequence ${health.sequence}`],
    ['readings', `${count('readings')} taken, ${count('late')} late, ${count('duplicates')} duplicates`],
    ['refused', refused.length === 0 ? 'none' : refused.map(([cause, n]) => `${n} ${cause}`).join(', ')],
    ['ticks', count('ticks')],
    [
      'segments',
      `${count('segments_waiting')} waiting, ${count('segments_confirmed')} confirmed, ${count('segments_shed')} shed`,
    ],
  ];
  const coarse = Object.entries((counters.resolution_shed ?? {}) as Record<string, number>);
  if (coarse.length > 0)
    lines.push(['coarser', `${coarse.map(([name, steps]) => `${name} in ${steps} steps`).join(', ')}, to save bytes`]);
  if (change !== null)
    lines.push(['change', `${change.outcome} at ${change.at}${change.reason === null ? '' : `: ${change.reason}`}`]);
  return lines.map(([name, text]) => `${name.padEnd(9)} ${text}\n`).join('');
}
