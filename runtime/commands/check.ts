/** `stillwell-gateway check`: everything a start needs, tried in order, and a few seconds of listening to the plant. */
import { type Site, toHex, topicsOf } from '@stillwell/protocol';
import { Command } from 'commander';
import { checkNamed } from '../bundle/load.ts';
import { type BrokerConfig, type RawOptions, readConfig, readGiven } from '../config.ts';
import { nodeDisk } from '../disk.ts';
import { RuntimeError } from '../errors.ts';
import { ReadingDecoder } from '../ingest/decode.ts';
import { refusedBecause } from '../ingest/quality.ts';
import { openConnection, shownBroker } from '../mqtt/connection.ts';
import { brokerOptions, siteOptions } from './options.ts';

interface CheckOptions extends Omit<RawOptions, 'data'> {
  readonly bundle?: string;
  readonly seconds: string;
  readonly json?: boolean;
}

interface Heard {
  readonly name: string;
  readonly topic: string | null;
  count: number;
  last: number | null;
  refused: string | null;
}

const CONNECT_MS = 10_000;

/** Builds the command. */
export function checkCommand(): Command {
  const command = new Command('check').description(
    'Checks site file, keys, bundle and broker, then listens and says which signals were heard. Changes nothing.',
  );
  return brokerOptions(siteOptions(command))
    .option('--bundle <file>', 'sealed bundle to check as well')
    .option('--seconds <n>', 'how long to listen', '5')
    .option('--json', 'one JSON object')
    .addHelpText(
      'after',
      '\nExample:\n  stillwell-gateway check --site site.yaml --trust author.pub --broker mqtt://localhost:1883 --bundle first.swb',
    )
    .action(check);
}

async function check(options: CheckOptions): Promise<void> {
  const seconds = /^\d+$/.test(options.seconds) ? Number(options.seconds) : Number.NaN;
  if (!(seconds >= 0 && seconds <= 3600))
    throw new RuntimeError('options', `--seconds: expected a whole number from 0 to 3600, got "${options.seconds}"`);
  const config = readConfig(nodeDisk, { ...options, data: '' });
  const { site } = config;
  const say = (text: string): void => {
    if (!options.json) process.stdout.write(`${text}\n`);
  };
  say(
    `site      ${site.site}: ${site.signals.length} signals, ${site.inputs.length} inputs, tick ${site.tickMs / 1000} s`,
  );
  say(`trust     ${config.trusted.length} author key${config.trusted.length === 1 ? '' : 's'}`);
  const bundle = options.bundle === undefined ? null : bundleSummary(options.bundle, config);
  if (bundle !== null) say(`bundle    ${bundle.digest.slice(0, 16)}…, sequence ${bundle.sequence}: every check passed`);
  const { protocol, heard } = await listen(config.broker, site, seconds, say);
  for (const one of heard) say(heardText(one, seconds));
  if (options.json) process.stdout.write(`${JSON.stringify({ site: site.site, bundle, protocol, seconds, heard })}\n`);
}

function bundleSummary(path: string, config: ReturnType<typeof readConfig>): { digest: string; sequence: number } {
  const sealed = readGiven(nodeDisk, path, 'bundle');
  const { digest, sequence } = checkNamed(path, sealed, config.site, config.trusted);
  return { digest: toHex(digest), sequence };
}

async function listen(
  broker: BrokerConfig,
  site: Site,
  seconds: number,
  say: (text: string) => void,
): Promise<{ protocol: string; heard: Heard[] }> {
  const channels = [...site.signals, ...site.inputs];
  const heard: Heard[] = channels.map(({ name, topic }) => ({ name, topic, count: 0, last: null, refused: null }));
  const decoder = new ReadingDecoder(site);
  const take = (channel: number, value: number): void => {
    const one = heard[channel]!;
    one.count++;
    one.last = value;
    one.refused = refusedBecause(value, channels[channel]!.range) ?? one.refused;
  };
  const connection = openConnection({
    ...broker,
    clientId: `stillwell-check-${site.site}-${process.pid}`,
    onMessage: (topic, payload) => {
      decoder.decode(topic, payload, {
        take,
        refuse: (channel, reason) => {
          heard[channel]!.refused = reason;
        },
      });
    },
  });
  try {
    await connection.firstConnect(CONNECT_MS);
    const protocol = connection.protocol === 5 ? '5' : '3.1.1';
    say(`broker    ${shownBroker(broker.url)}: connected, MQTT ${protocol}`);
    await connection.subscribe([...decoder.filters, topicsOf(site.root, site.site).bundle], 1, CONNECT_MS);
    await new Promise((resolve) => setTimeout(resolve, seconds * 1000));
    return { protocol, heard };
  } finally {
    await connection.end();
  }
}

function heardText(one: Heard, seconds: number): string {
  const name = one.name.padEnd(20);
  if (one.topic === null) return `silent    ${name} has no topic in the site file`;
  if (one.refused !== null) return `refused   ${name} ${one.topic}: ${one.refused}`;
  if (one.count === 0) return `not heard ${name} ${one.topic}: nothing within ${seconds} s`;
  return `heard     ${name} ${one.topic}: ${one.count} readings, last ${one.last}`;
}
