/** `stillwell ask`: what would the forecast be under another plan? */
import { isName, parseDuration } from '@stillwell/protocol';
import { Command, InvalidArgumentError } from 'commander';
import { TrainError } from '../errors.ts';
import { seconds, several } from '../option-values.ts';
import { rootOption, siteNameOption } from '../topic-option.ts';

interface AskCommandOptions {
  readonly broker: string;
  readonly site: string;
  readonly root: string;
  readonly plan: readonly string[];
  readonly signal?: readonly string[];
  readonly horizon?: number | string;
  readonly wait: number;
  readonly json: boolean;
}

/** The command, to be joined to the program. */
export function askCommand(): Command {
  return new Command('ask')
    .description("Asks a site's gateway what the forecast would be under another plan; changes nothing there.")
    .requiredOption('--broker <url>', 'mqtt://[user:password@]host[:port] or mqtts://…')
    .requiredOption('--site <name>', 'site to ask', siteNameOption)
    .requiredOption(
      '--plan <input=plan>',
      'a value held, values by commas from the next tick on with /STEP behind (a tick each without), none, or @FILE; may be repeated',
      several,
    )
    .option('--root <topic>', 'first level of the topics', rootOption, 'stillwell')
    .option('--signal <name>', 'only this signal; may be repeated', several)
    .option('--horizon <length>', 'how far: ticks, or a duration such as 2h; all of it by default', horizonOption)
    .option('--wait <seconds>', 'how long to wait for the answer', seconds, 10)
    .option('--json', "the gateway's answer as one line of JSON", false)
    .addHelpText(
      'after',
      '\nA file holds a plan message (JSON), or lines of time and value, or of values alone (CSV).\n' +
        '\nExamples:\n  stillwell ask --broker mqtt://localhost:1883 --site store-3 --plan defrost=0,0,1,0/30min\n' +
        '  stillwell ask --broker mqtt://localhost:1883 --site store-3 --plan defrost=none --signal room --json',
    )
    .action(ask);
}

function horizonOption(text: string): number | string {
  if (/^[1-9]\d{0,8}$/.test(text)) return Number(text);
  if ((parseDuration(text) ?? 0) > 0) return text;
  throw new InvalidArgumentError('Expected a number of ticks, or a duration such as 2h.');
}

async function ask(options: AskCommandOptions): Promise<void> {
  const [{ askSite }, { readPlans }] = await Promise.all([import('../desk/ask.ts'), import('../desk/ask-plans.ts')]);
  const plans = readPlans(options.plan);
  const odd = [...Object.keys(plans), ...(options.signal ?? [])].find((name) => !isName(name));
  if (odd !== undefined) throw new TrainError('options', `expected a name of an input or signal, got "${odd}"`);
  const { broker, root, site, horizon, signal: signals } = options;
  const answer = await askSite({ broker, root, site, plans, horizon, signals, waitMs: options.wait * 1000 });
  if (answer === null) {
    process.stderr.write(
      `stillwell: no answer of ${site} within ${options.wait} s; check site name and root, and that its gateway runs\n`,
    );
    process.exitCode = 1;
    return;
  }
  if (options.json) process.stdout.write(`${JSON.stringify(answer)}\n`);
  if (answer.outcome === 'refused')
    throw new TrainError('options', `${site} refused (${answer.cause}): ${answer.reason}`);
  if (options.json) return;
  const { answerText } = await import('../desk/ask-view.ts');
  process.stdout.write(`${answerText(answer, process.stdout.columns || 80)}\n`);
}
