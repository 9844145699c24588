/** `stillwell-gateway check`: everything a start needs, tried in order, and a while of listening to the plant. */
import { checkTopicFilter, toHex, topicsOf } from '@stillwell/protocol';
import { Command } from 'commander';
import { checkNamed, siteOfBundle } from '../bundle/load.ts';
import { checkSites, type GatewayConfig, type RawSitesOptions, readConfig, readGiven } from '../config.ts';
import { nodeDisk } from '../disk.ts';
import { RuntimeError } from '../errors.ts';
import { HeardSite } from '../ingest/heard.ts';
import { type Connection, openConnection, shownBroker } from '../mqtt/connection.ts';
import { heardData, heardLines } from './heard-text.ts';
import { brokerOptions, gather, sitesOptions } from './options.ts';

interface CheckOptions extends Omit<RawSitesOptions, 'data'> {
  readonly bundle?: string;
  readonly seconds: string;
  readonly around: readonly string[];
  readonly json?: boolean;
}

const CONNECT_MS = 10_000;
const REDRAW_MS = 500;

/** Builds the command. */
export function checkCommand(): Command {
  const command = new Command('check').description(
    'Checks site file, keys, bundle and broker, then listens and says signal by signal what came, what was refused and why, and what came that no signal takes. Changes nothing.',
  );
  return brokerOptions(sitesOptions(command))
    .option('--bundle <file>', 'sealed bundle to check as well')
    .option('--seconds <n>', 'how long to listen', '10')
    .option(
      '--around <filter>',
      'listen to this topic filter too, to find what silent signals are called; may be repeated',
      gather,
      [],
    )
    .option('--json', 'one JSON object, of several sites one a line')
    .addHelpText(
      'after',
      '\nExample:\n  stillwell-gateway check --site site.yaml --trust author.pub --broker mqtt://localhost:1883 --around "plant/#"',
    )
    .action(check);
}

async function check(options: CheckOptions): Promise<void> {
  const seconds = /^\d+$/.test(options.seconds) ? Number(options.seconds) : Number.NaN;
  if (!(seconds >= 0 && seconds <= 3600))
    throw new RuntimeError('options', `--seconds: expected a whole number from 0 to 3600, got "${options.seconds}"`);
  for (const filter of options.around) checkAround(filter);
  const configs = options.site.map((site) => readConfig(nodeDisk, { ...options, site, data: '' }));
  checkSites(
    configs.map(({ site }) => site),
    options.site,
  );
  const bundle = options.bundle === undefined ? null : bundleSummary(options.bundle, configs);
  // One after the other: each has the terminal to itself.
  for (const config of configs)
    await checkSite(config, options, seconds, bundle?.site === config.site ? bundle.summary : null);
}

async function checkSite(
  config: GatewayConfig,
  options: CheckOptions,
  seconds: number,
  bundle: { readonly digest: string; readonly sequence: number } | null,
): Promise<void> {
  const { site } = config;
  const say = (text: string): void => {
    if (!options.json) process.stdout.write(`${text}\n`);
  };
  say(
    `site      ${site.site}: ${site.signals.length} signals, ${site.inputs.length} inputs, tick ${site.tickMs / 1000} s`,
  );
  say(`trust     ${config.trusted.length} author key${config.trusted.length === 1 ? '' : 's'}`);
  if (bundle !== null) say(`bundle    ${bundle.digest.slice(0, 16)}…, sequence ${bundle.sequence}: every check passed`);
  const heard = new HeardSite(site);
  const screen = process.stdout.isTTY && !options.json ? new Screen() : null;
  const found = await listen(config, heard, options.around, seconds, say, screen);
  const data = { site: site.site, bundle, protocol: found.protocol, seconds, ...heardData(heard, seconds, Date.now()) };
  if (options.json) process.stdout.write(`${JSON.stringify({ ...data, refused_filters: found.refusedFilters })}\n`);
}

function checkAround(filter: string): void {
  try {
    checkTopicFilter(filter);
  } catch (error) {
    throw new RuntimeError('options', `--around: ${(error as Error).message}`);
  }
}

/** Judges the bundle for the one of the sites that it is for. */
function bundleSummary(path: string, configs: readonly GatewayConfig[]) {
  const sealed = readGiven(nodeDisk, path, 'bundle');
  const { site, trusted } = configs[siteOfBundle(path, sealed, configs)]!;
  const { digest, sequence } = checkNamed(path, sealed, site, trusted);
  return { site, summary: { digest: toHex(digest), sequence } };
}

async function listen(
  { broker, site }: GatewayConfig,
  heard: HeardSite,
  around: readonly string[],
  seconds: number,
  say: (text: string) => void,
  screen: Screen | null,
): Promise<{ protocol: string; refusedFilters: readonly string[] }> {
  const connection = openConnection({
    ...broker,
    clientId: `stillwell-check-${site.site}-${process.pid}`,
    onMessage: (topic, payload, { retain }) => heard.message(topic, payload, retain, Date.now()),
  });
  try {
    await connection.firstConnect(CONNECT_MS);
    const protocol = connection.protocol === 5 ? '5' : '3.1.1';
    say(`broker    ${shownBroker(broker.url)}: connected, MQTT ${protocol}`);
    const refusedFilters = await subscribe(connection, heard, [topicsOf(site.root, site.site).bundle], around);
    for (const filter of refusedFilters) say(`broker    lets us not subscribe ${filter}`);
    say(`listening for ${seconds} s`);
    const began = Date.now();
    const lines = (): readonly string[] => heardLines(heard, (Date.now() - began) / 1000, Date.now());
    const redraw = screen === null ? null : setInterval(() => screen.draw(lines()), REDRAW_MS);
    await new Promise((resolve) => setTimeout(resolve, seconds * 1000));
    if (redraw !== null) clearInterval(redraw);
    if (screen !== null) screen.clear();
    for (const line of heardLines(heard, seconds, Date.now())) say(line);
    return { protocol, refusedFilters };
  } finally {
    await connection.end();
  }
}

/** What the site needs must be granted; what only helps may be refused: births a broker may keep, and what is around. */
async function subscribe(
  connection: Connection,
  heard: HeardSite,
  own: readonly string[],
  around: readonly string[],
): Promise<readonly string[]> {
  const wanted = [...heard.planKeeper.filters, ...heard.decoder.filters];
  const isHelp = (filter: string): boolean => filter.startsWith('$');
  await connection.subscribe([...own, ...wanted.filter((filter) => !isHelp(filter))], 1, CONNECT_MS);
  const refused: string[] = [];
  for (const filter of [...wanted.filter(isHelp), ...around]) {
    try {
      await connection.subscribe([filter], 0, CONNECT_MS);
    } catch (error) {
      if (!(error instanceof RuntimeError) || error.code !== 'broker') throw error;
      refused.push(filter);
    }
  }
  return refused;
}

/** Redraws lines in place on a terminal. */
class Screen {
  #height = 0;

  draw(lines: readonly string[]): void {
    const { columns, rows } = process.stdout;
    const shown = lines.slice(0, Math.max(1, rows - 1)).map((line) => line.slice(0, columns));
    this.clear();
    process.stdout.write(`${shown.join('\n')}\n`);
    this.#height = shown.length;
  }

  clear(): void {
    if (this.#height > 0) process.stdout.write(`\x1b[${this.#height}A\x1b[J`);
    this.#height = 0;
  }
}
