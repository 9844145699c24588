/**
 * `npm run bench -- SUITE [--json] [--data DIR] [--case WORD] [--profile DIR]`: runs one suite and prints its rows as they come, one JSON object a line
 * with --json. Exit 0 when the suite ran, 2 when it was asked for wrongly.
 */
import { existsSync, statSync } from 'node:fs';
import { parseArgs } from 'node:util';
import { type BenchOptions, type Row, SUITES, type Suite, type SuiteName, tableHead, tableRow } from './harness.ts';

const USAGE = `usage: npm run bench -- SUITE [--json] [--data DIR] [--case WORD] [--profile DIR]\n  SUITE  one of ${SUITES.join(', ')}\n  --json  one JSON object a line\n  --data  folder with measured series (ETTh1.csv)\n  --case  only cases whose name holds WORD (suites accuracy, training)\n  --profile  folder for processor profiles of our side (suite training)`;

class UsageError extends Error {}

interface Asked {
  readonly suite: SuiteName;
  readonly json: boolean;
  readonly data: string | null;
  readonly only: string | null;
  readonly profile: string | null;
}

function readArguments(): Asked {
  let parsed: { values: { json?: boolean; data?: string; case?: string; profile?: string }; positionals: string[] };
  try {
    parsed = parseArgs({
      options: {
        json: { type: 'boolean' },
        data: { type: 'string' },
        case: { type: 'string' },
        profile: { type: 'string' },
      },
      allowPositionals: true,
    });
  } catch (error) {
    throw new UsageError((error as Error).message);
  }
  const { values, positionals } = parsed;
  const suite = SUITES.find((name) => name === positionals[0]);
  if (suite === undefined || positionals.length !== 1)
    throw new UsageError(`suite: expected one of ${SUITES.join(', ')}, got ${positionals.join(' ') || 'none'}`);
  const data = values.data ?? null;
  if (data !== null && !statSync(data, { throwIfNoEntry: false })?.isDirectory())
    throw new UsageError(`--data: expected a folder, got ${data}, which is none`);
  return { suite, json: values.json === true, data, only: values.case ?? null, profile: values.profile ?? null };
}

async function* each(rows: AsyncIterable<Row> | Promise<readonly Row[]>): AsyncIterable<Row> {
  if (rows instanceof Promise) yield* await rows;
  else yield* rows;
}

async function main(): Promise<void> {
  const asked = readArguments();
  const say = (line: string): void => void (asked.json ? process.stderr : process.stdout).write(`${line}\n`);
  const module = new URL(`./${asked.suite}.js`, import.meta.url);
  if (!existsSync(module)) {
    say(`suite ${asked.suite} has no rows yet`);
    return;
  }
  const suite = (await import(module.href)) as Suite;
  const options: BenchOptions = { data: asked.data, only: asked.only, profile: asked.profile, note: say };
  if (!asked.json) say(tableHead());
  for await (const line of each(suite.rows(options)))
    process.stdout.write(`${asked.json ? JSON.stringify(line) : tableRow(line)}\n`);
}

main().catch((error: unknown) => {
  const wrong = error instanceof UsageError;
  process.stderr.write(wrong ? `bench: ${error.message}\n${USAGE}\n` : `bench: ${(error as Error).stack}\n`);
  process.exitCode = wrong ? 2 : 1;
});
