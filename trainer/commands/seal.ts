/** `stillwell seal`: signs a candidate under the next sequence number. */
import { type KeyPair, keyIdOf, openSealed, publicHalf } from '@stillwell/protocol';
import { Command } from 'commander';
import { hex, openBundleFile } from '../bundle-file.ts';
import { TrainError } from '../errors.ts';
import { readBytesFile, readPrivateKey, refuseToReplace } from '../key-file.ts';
import { reason, wholeNumber } from '../option-values.ts';
import { writeOutput } from '../output-file.ts';
import { nextNumbers, sealCandidate } from '../seal-candidate.ts';

interface SealCommandOptions {
  readonly candidate: string;
  readonly key: string;
  readonly out: string;
  readonly sequence?: number;
  readonly epoch?: number;
  readonly after?: string;
  readonly override?: string;
  readonly maxBytes?: number;
  readonly force: boolean;
  readonly json: boolean;
}

/** The command, to be joined to the program. */
export function sealCommand(): Command {
  return new Command('seal')
    .description('Checks a candidate as a gateway would, and signs it with the author key.')
    .requiredOption(
      '--candidate <file>',
      'candidate.swc of a fit or refit (or a sealed bundle, to sign its document again)',
    )
    .requiredOption('--key <file>', 'private author key')
    .requiredOption('--out <file>', 'sealed bundle to write (.swb)')
    .option('--after <bundle>', 'bundle that it follows: the sequence is one above that one')
    .option('--sequence <n>', 'sequence number; only ever rises within a key epoch (default 1)', wholeNumber(1))
    .option('--epoch <n>', 'key epoch; a rotation of keys starts a new one (default 1)', wholeNumber(0, 2 ** 32 - 1))
    .option('--override <reason>', 'seal although the judge found no skill; the reason stands in the bundle', reason)
    .option('--max-bytes <n>', 'largest sealed bundle (default 24576)', wholeNumber(1))
    .option('--force', 'replace --out if it is there already', false)
    .option('--json', 'say what was sealed as JSON', false)
    .addHelpText(
      'after',
      '\nExamples:\n  stillwell seal --candidate fit/candidate.swc --key author.key --out pump-7.swb\n' +
        '  stillwell seal --candidate refit/candidate.swc --key author.key --after pump-7.swb --out pump-7-2.swb',
    )
    .action(seal);
}

function seal(options: SealCommandOptions): void {
  const candidate = openBundleFile(options.candidate);
  const key = readPrivateKey(options.key);
  const numbers = nextNumbers(
    { sequence: options.sequence ?? null, epoch: options.epoch ?? null },
    options.after === undefined ? null : predecessor(options.after, candidate.bundle.site, key),
  );
  refuseToReplace(options.out, options.force);
  const override = options.override ?? null;
  const limit = options.maxBytes === undefined ? {} : { maxBytes: options.maxBytes };
  const made = sealCandidate(candidate, key, { ...numbers, override, ...limit }, options.candidate);
  writeOutput(options.out, made.sealed);
  const { judge, site } = made.bundle;
  const said = { site, digest: hex(made.digest), ...numbers, bytes: made.sealed.length, override: judge.override };
  process.stdout.write(
    options.json
      ? `${JSON.stringify({ ...said, out: options.out })}\n`
      : `${options.out}: ${site}, sequence ${said.sequence} of epoch ${said.epoch}, ${said.bytes} bytes\n` +
          `  digest ${said.digest}\n` +
          (judge.override === null ? '' : `  sealed without skill: ${judge.override}\n`),
  );
}

/** Where our own key signed it the signature must hold, since only that vouches for its numbers. */
function predecessor(file: string, site: string, key: KeyPair) {
  const before = openBundleFile(file);
  if (before.envelope === null) {
    throw new TrainError(
      'options',
      `--after ${file}: expected a sealed bundle, got a candidate, which has no sequence`,
    );
  }
  if (before.bundle.site !== site) {
    throw new TrainError('options', `--after ${file}: is a bundle of site "${before.bundle.site}", expected "${site}"`);
  }
  const own = hex(keyIdOf(key.publicKey));
  if (before.envelope.signatures.some(({ keyId }) => hex(keyId) === own)) {
    try {
      openSealed(readBytesFile(file, 'a sealed bundle (.swb)'), [publicHalf(key)]);
    } catch (cause) {
      throw new TrainError('bundle', `--after ${file}: ${(cause as Error).message}`, { cause });
    }
  }
  const { epoch, sequence } = before.envelope;
  return { file, epoch, sequence, digest: before.digest };
}
